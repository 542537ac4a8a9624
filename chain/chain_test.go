package chain

import "testing"

func TestStarterReads(t *testing.T) {
	if _, err := Read("starter.toml", []byte(Starter()), nil); err != nil {
		t.Fatal(err)
	}
}

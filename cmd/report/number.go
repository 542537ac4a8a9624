package report

import (
	"bytes"
	"encoding/json"
	"math"
	"strconv"
)

// Number is a figure that may not be there. The zero Number is not there. It is null in JSON when
// it is not there, and the shortest text that reads back as the same float64 otherwise.
type Number struct {
	value float64
	there bool
}

// Of returns x as a Number; NaN and the infinities (such as the level of silence) are not there.
func Of(x float64) Number {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return Number{}
	}
	return Number{value: x, there: true}
}

// Value returns the figure and whether it is there; 0 and false where it is not.
func (n Number) Value() (float64, bool) { return n.value, n.there }

// There tells whether the figure is there.
func (n Number) There() bool { return n.there }

// Exact returns the shortest text that reads back as the figure; empty where it is not there.
func (n Number) Exact() string {
	if !n.there {
		return ""
	}
	return strconv.FormatFloat(n.value, 'g', -1, 64)
}

// MarshalJSON writes the figure, or null.
func (n Number) MarshalJSON() ([]byte, error) {
	if !n.there {
		return []byte("null"), nil
	}
	return json.Marshal(n.value)
}

// UnmarshalJSON reads a figure, or null; it returns the error of encoding/json for anything else.
func (n *Number) UnmarshalJSON(text []byte) error {
	if bytes.Equal(bytes.TrimSpace(text), []byte("null")) {
		*n = Number{}
		return nil
	}
	var x float64
	if err := json.Unmarshal(text, &x); err != nil {
		return err
	}
	*n = Of(x)
	return nil
}

package chain

// Need tells whether a stage kind takes something.
type Need uint8

// The needs.
const (
	No Need = iota
	May
	Must
)

// PartKey is a part of a stage kind.
type PartKey struct {
	Key      string
	Unit     Unit
	Optional bool
}

// Kind is a kind of stage: what it takes, from which the reading of chain files follows. How it is wired is package
// circuit's.
type Kind struct {
	Name       string
	Connection string // in words, for people
	Amplifier  Need
	Bias       Need
	Parts      []PartKey
	Legs       bool // takes [[stage.input]] instead of from
	Leg        bool // takes leg = "ground" | "bias"
	To         bool // takes to = "ground" | "bias"
	Pick       bool // takes from = […] and pick
}

func r(key string) PartKey         { return PartKey{Key: key, Unit: Ohm} }
func c(key string) PartKey         { return PartKey{Key: key, Unit: Farad} }
func maybe(p PartKey) PartKey      { p.Optional = true; return p }
func parts(p ...PartKey) []PartKey { return p }

// Kinds returns every kind of stage.
func Kinds() []*Kind {
	return []*Kind{
		{Name: "inverting", Amplifier: Must, Bias: Must, Parts: parts(r("r_in"), maybe(c("c_in")), r("r_f"), maybe(c("c_f"))),
			Connection: "from – c_in – r_in – (−); r_f ∥ c_f from (−) to the output; (+) on the bias"},
		{Name: "summer", Amplifier: Must, Bias: Must, Parts: parts(r("r_f"), maybe(c("c_f"))), Legs: true,
			Connection: "each leg: from – c – r – (−); r_f ∥ c_f from (−) to the output; (+) on the bias"},
		{Name: "non-inverting", Amplifier: Must, Bias: May, Parts: parts(maybe(c("c_in")), maybe(r("r_bias")), r("r_f"), maybe(c("c_f")), r("r_g"), maybe(c("c_g"))), Leg: true,
			Connection: "from – c_in – (+); r_bias from (+) to the bias; r_f ∥ c_f from the output to (−); r_g – c_g from (−) to the leg"},
		{Name: "follower", Amplifier: Must, Bias: May, Parts: parts(maybe(c("c_in")), maybe(r("r_bias"))),
			Connection: "from – c_in – (+); r_bias from (+) to the bias; output to (−)"},
		{Name: "sallen-key low-pass", Amplifier: Must, Bias: May, Parts: parts(r("r_1"), r("r_2"), c("c_1"), c("c_2"), maybe(r("r_a")), maybe(r("r_b"))),
			Connection: "from – r_1 – middle – r_2 – (+); c_1 from the middle to the output; c_2 from (+) to ground; r_a from (−) to the bias, r_b from (−) to the output"},
		{Name: "sallen-key high-pass", Amplifier: Must, Bias: Must, Parts: parts(c("c_1"), c("c_2"), r("r_1"), r("r_2")),
			Connection: "from – c_1 – middle – c_2 – (+); r_1 from the middle to the output; r_2 from (+) to the bias"},
		{Name: "multiple-feedback low-pass", Amplifier: Must, Bias: Must, Parts: parts(r("r_1"), r("r_2"), r("r_3"), c("c_1"), c("c_2")),
			Connection: "from – r_1 – middle; r_2 from the middle to the output; r_3 from the middle to (−); c_1 from (−) to the output; c_2 from the middle to ground"},
		{Name: "rc low-pass", Parts: parts(r("r"), c("c")), Connection: "from – r – output; c to ground"},
		{Name: "rc high-pass", Bias: May, Parts: parts(c("c"), r("r")), To: true, Connection: "from – c – output; r to ground or to the bias"},
		{Name: "divider", Bias: May, Parts: parts(r("r_top"), r("r_bottom"), maybe(c("c_top")), maybe(c("c_bottom"))), To: true,
			Connection: "from – r_top ∥ c_top – output; r_bottom ∥ c_bottom to ground or to the bias"},
		{Name: "biased coupling", Parts: parts(c("c"), r("top"), r("bottom")), Connection: "from – c – output; top to the supply, bottom to ground"},
		{Name: "passive sum", Parts: parts(maybe(r("r_load"))), Legs: true, Connection: "each leg: from – c – r – output; r_load to ground"},
		{Name: "select", Pick: true, Connection: "passes on the one of from that pick names"},
	}
}

// kindNamed returns the kind of a name, or nil.
func kindNamed(name string) *Kind {
	for _, k := range Kinds() {
		if k.Name == name {
			return k
		}
	}
	return nil
}

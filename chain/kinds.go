package chain

// Need tells whether something takes a key.
type Need uint8

// The needs.
const (
	No   Need = iota // the key is unknown there
	May              // it may be left out
	Must             // its absence is a fault
)

// PartKey is a part that a stage kind has.
type PartKey struct {
	Key      string
	Unit     Unit
	Optional bool
}

// Kind is a kind of stage: what it takes, from which the reading of chain files follows. How it is wired is package
// circuit's.
type Kind struct {
	Name       string
	Connection string // in words, for people; (+) and (−) are the amplifier's inputs
	Amplifier  Need
	// Bias that is May must be there where something ends on it, and must not where nothing does: r_bias, r_a,
	// leg = "bias" and to = "bias" do.
	Bias  Need
	Parts []PartKey
	Legs  bool // takes [[stage.input]] instead of from
	Leg   bool // takes leg = "ground" | "bias"
	To    bool // takes to = "ground" | "bias"
	Pick  bool // takes from = […] and pick

	Diodes      bool // takes forward, to_supply and to_ground
	Polynomials bool // takes numerator and denominator
	Own         bool // takes [[stage.part]] and [[stage.amplifier]]
}

// Kinds returns every kind of stage; the caller may change what it gets.
func Kinds() []*Kind {
	r := func(key string) PartKey { return PartKey{Key: key, Unit: Ohm} }
	c := func(key string) PartKey { return PartKey{Key: key, Unit: Farad} }
	maybe := func(p PartKey) PartKey { p.Optional = true; return p }
	return []*Kind{
		{
			Name: "inverting", Amplifier: Must, Bias: Must,
			Parts:      []PartKey{r("r_in"), maybe(c("c_in")), r("r_f"), maybe(c("c_f"))},
			Connection: "from – c_in – r_in – (−), r_f ∥ c_f from (−) to the output, (+) on the bias",
		},
		{
			Name: "summer", Amplifier: Must, Bias: Must, Legs: true,
			Parts:      []PartKey{r("r_f"), maybe(c("c_f"))},
			Connection: "each leg from – c – r – (−), r_f ∥ c_f from (−) to the output, (+) on the bias",
		},
		{
			Name: "non-inverting", Amplifier: Must, Bias: May, Leg: true,
			Parts:      []PartKey{maybe(c("c_in")), maybe(r("r_bias")), r("r_f"), maybe(c("c_f")), r("r_g"), maybe(c("c_g"))},
			Connection: "from – c_in – (+), r_bias from (+) to the bias, r_f ∥ c_f from the output to (−), r_g – c_g from (−) to the leg",
		},
		{
			Name: "follower", Amplifier: Must, Bias: May,
			Parts:      []PartKey{maybe(c("c_in")), maybe(r("r_bias"))},
			Connection: "from – c_in – (+), r_bias from (+) to the bias, the output to (−)",
		},
		{
			Name: "sallen-key low-pass", Amplifier: Must, Bias: May,
			Parts:      []PartKey{r("r_1"), r("r_2"), c("c_1"), c("c_2"), maybe(r("r_a")), maybe(r("r_b"))},
			Connection: "from – r_1 – middle – r_2 – (+), c_1 from the middle to the output, c_2 from (+) to ground, r_a from (−) to the bias, r_b from (−) to the output",
		},
		{
			Name: "sallen-key high-pass", Amplifier: Must, Bias: Must,
			Parts:      []PartKey{c("c_1"), c("c_2"), r("r_1"), r("r_2")},
			Connection: "from – c_1 – middle – c_2 – (+), r_1 from the middle to the output, r_2 from (+) to the bias",
		},
		{
			Name: "multiple-feedback low-pass", Amplifier: Must, Bias: Must,
			Parts:      []PartKey{r("r_1"), r("r_2"), r("r_3"), c("c_1"), c("c_2")},
			Connection: "from – r_1 – middle, r_2 from the middle to the output, r_3 from the middle to (−), c_1 from (−) to the output, c_2 from the middle to ground",
		},
		{
			Name:       "rc low-pass",
			Parts:      []PartKey{r("r"), c("c")},
			Connection: "from – r – output, c from the output to ground",
		},
		{
			Name: "rc high-pass", Bias: May, To: true,
			Parts:      []PartKey{c("c"), r("r")},
			Connection: "from – c – output, r from the output to ground or to the bias",
		},
		{
			Name: "divider", Bias: May, To: true,
			Parts:      []PartKey{r("r_top"), r("r_bottom"), maybe(c("c_top")), maybe(c("c_bottom"))},
			Connection: "from – r_top ∥ c_top – output, r_bottom ∥ c_bottom from the output to ground or to the bias",
		},
		{
			Name:       "biased coupling",
			Parts:      []PartKey{c("c"), r("top"), r("bottom")},
			Connection: "from – c – output, top from the supply to the output, bottom from the output to ground",
		},
		{
			Name: "passive sum", Legs: true,
			Parts:      []PartKey{maybe(r("r_load"))},
			Connection: "each leg from – c – r – output, r_load from the output to ground",
		},
		{
			Name: "clamp", Diodes: true,
			Parts:      []PartKey{r("r")},
			Connection: "from – r – output, diodes from the output to the supply and from ground to the output",
		},
		{
			Name: "transfer function", Amplifier: Must, Bias: May, Polynomials: true,
			Connection: "from, against the bias or ground, through the function of s to the output, with the amplifier's limits",
		},
		{
			Name: "network", Bias: May, Own: true,
			Connection: "parts and amplifiers between the nodes in, out, supply, ground, bias and those of your own",
		},
		{
			Name: "select", Pick: true,
			Connection: "the one of from that pick names is passed on, as it is",
		},
	}
}

// KindNamed returns the kind of a name, or nil.
func KindNamed(name string) *Kind {
	for _, k := range Kinds() {
		if k.Name == name {
			return k
		}
	}
	return nil
}

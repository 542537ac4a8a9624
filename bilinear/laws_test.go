package bilinear

import (
	"math"
	"math/cmplx"
	"testing"

	"pgregory.net/rapid"
)

// ladder draws a network of resistors and capacitors with up to three amplifiers, each a stage in front of the next: a
// resistor to its (−), feedback around it, now and then a load. Parts span six decades.
func ladder(t *rapid.T) (n Network, stages int) {
	ohms := func(name string) float64 { return math.Pow(10, rapid.Float64Range(2, 6).Draw(t, name)) }
	farads := func(name string) float64 { return math.Pow(10, rapid.Float64Range(-11, -5).Draw(t, name)) }
	n = Network{Nodes: 3, Drives: []int{1, 2}}
	node := func() int { n.Nodes++; return n.Nodes - 1 }
	from := 2
	stages = rapid.IntRange(1, 3).Draw(t, "stages")
	for range stages {
		middle, minus, out := node(), node(), node()
		n.Resistors = append(n.Resistors, Branch{from, middle, ohms("r1")}, Branch{middle, minus, ohms("r2")}, Branch{minus, out, ohms("rf")})
		n.Capacitors = append(n.Capacitors, Branch{middle, Ground, farads("c")}, Branch{minus, out, farads("cf")})
		n.Amplifiers = append(n.Amplifiers, Amplifier{
			Plus: Ground, Minus: minus, Out: out, GainBandwidth: math.Pow(10, rapid.Float64Range(5, 7).Draw(t, "gbw")), OpenLoopGain: 1e5,
			OutputResistance: rapid.SampledFrom([]float64{0, 100}).Draw(t, "ro"), SlewRate: math.Pow(10, rapid.Float64Range(4, 7).Draw(t, "slew")),
			HighRail: 1, LowRail: Ground, HighMargin: -1, LowMargin: -1.5,
		})
		from = out
	}
	return n, stages
}

func compiled(t *rapid.T, n Network) *Compiled {
	at := Operating{Volts: make([]float64, n.Nodes), Sources: make([]float64, n.elements())}
	c, err := Compile(n, at, 48000*64, []int{n.Nodes - 1})
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// Whatever the parts and the input, a limited run stays finite and its sources within their limits, and where it
// touches nothing it is the linear run to the bit.
func TestLimitedRunsStayWithinTheirLimits(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n, _ := ladder(t)
		c := compiled(t, n)
		limited, linear := c.Start(), c.Start()
		y, yLinear := make([]float64, 1), make([]float64, 1)
		level := math.Pow(10, rapid.Float64Range(-4, 2).Draw(t, "level"))
		period := rapid.IntRange(10, 400).Draw(t, "period")
		parted := false
		for i := range 600 {
			x := level
			if i/period%2 == 1 {
				x = -level
			}
			touched := c.Step(limited, []float64{0, x}, y)
			c.StepLinear(linear, []float64{0, x}, yLinear)
			parted = parted || touched
			for k, e := range limited.E {
				if !(e <= 1+1e-9 && e >= -1.5-1e-9) {
					t.Fatalf("step %d: source %d is %g V", i, k, e)
				}
			}
			if math.IsNaN(y[0]) || math.IsInf(y[0], 0) {
				t.Fatalf("step %d: output %g V", i, y[0])
			}
			if !parted && y[0] != yLinear[0] {
				t.Fatalf("step %d: %g V, linear %g V, and nothing was touched", i, y[0], yLinear[0])
			}
		}
	})
}

// Superposition and scaling: the linear run of a sum is the sum of the runs, and impedances all larger by a factor change
// nothing.
func TestLinearRunsAddAndScale(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n, _ := ladder(t)
		for i := range n.Amplifiers {
			n.Amplifiers[i].OutputResistance = 0 // which would have to grow with the others
		}
		c := compiled(t, n)
		k := math.Pow(10, rapid.Float64Range(-2, 2).Draw(t, "factor"))
		larger := n
		larger.Resistors, larger.Capacitors = nil, nil
		for _, r := range n.Resistors {
			larger.Resistors = append(larger.Resistors, Branch{r.A, r.B, r.Value * k})
		}
		for _, x := range n.Capacitors {
			larger.Capacitors = append(larger.Capacitors, Branch{x.A, x.B, x.Value / k})
		}
		scaled := compiled(t, larger)
		a, b, both, other := c.Start(), c.Start(), c.Start(), scaled.Start()
		ya, yb, y, z := make([]float64, 1), make([]float64, 1), make([]float64, 1), make([]float64, 1)
		peak := 0.
		for i := range 500 {
			u, v := math.Sin(float64(i)*0.02), math.Cos(float64(i)*0.3)
			c.StepLinear(a, []float64{0, u}, ya)
			c.StepLinear(b, []float64{0, v}, yb)
			c.StepLinear(both, []float64{0, u + v}, y)
			scaled.StepLinear(other, []float64{0, u + v}, z)
			peak = math.Max(peak, math.Abs(y[0]))
			// Rounding, of stages whose gains reach 1e8 between them.
			if d := math.Abs(y[0] - ya[0] - yb[0]); !(d <= 1e-9*peak+1e-12) {
				t.Fatalf("step %d: sum %g V, together %g V", i, ya[0]+yb[0], y[0])
			}
			if d := math.Abs(y[0] - z[0]); !(d <= 1e-7*peak+1e-12) {
				t.Fatalf("step %d: %g V, impedances times %g: %g V", i, y[0], k, z[0])
			}
		}
	})
}

// A lifted block is the plain steps.
func TestLiftedBlockIsItsSteps(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n, _ := ladder(t)
		c := compiled(t, n)
		const steps = 24
		l := c.Lift(steps, 1, []Reading{{Step: 7, Of: Source, Item: 0}, {Step: steps - 1, Of: Node, Item: 0}, {Step: 3, Of: Slope, Item: 0}, {Step: 12, Of: Sense, Item: 0}})
		s, y := c.Start(), make([]float64, 1)
		for i := range 50 {
			c.StepLinear(s, []float64{0, math.Sin(float64(i))}, y)
		}
		x, u := make([]float64, c.States()), make([]float64, steps)
		c.Pack(x, s)
		for i := range u {
			u[i] = math.Cos(float64(i) * 1.7)
		}
		got := make([]float64, c.States()+4)
		Apply(got, l.FromState, x)
		Apply(got, l.FromInput, u)
		want := make([]float64, len(got))
		for i, v := range u {
			before := s.H[0]
			c.StepLinear(s, []float64{0, v}, y)
			switch i {
			case 7:
				want[c.States()] = s.E[0]
			case 3:
				want[c.States()+2] = s.E[0] - before
			case 12:
				want[c.States()+3] = c.senseOf(s, 0)
			}
		}
		c.Pack(want, s)
		want[c.States()+1] = y[0]
		size := 0.
		for _, v := range want {
			size = math.Max(size, math.Abs(v))
		}
		for i := range want {
			if !(math.Abs(got[i]-want[i]) <= 1e-12*size+1e-15) {
				t.Fatalf("row %d: %g, stepped %g", i, got[i], want[i])
			}
		}
	})
}

// Poles of an RC and of a unity-gain Sallen-Key, whose f0 and Q are 1/(2π√(R1R2C1C2)) and √(R1R2C1C2)/(C2(R1+R2)).
func TestPolesAreTheCircuits(t *testing.T) {
	inf := math.Inf(1)
	n := Network{Nodes: 6, Resistors: []Branch{{2, 3, 8.2e3}, {3, 4, 8.2e3}}, Capacitors: []Branch{{3, 5, 3.3e-9}, {4, Ground, 1.5e-9}}, Drives: []int{1, 2},
		Amplifiers: []Amplifier{{Plus: 4, Minus: 5, Out: 5, GainBandwidth: inf, OpenLoopGain: inf, SlewRate: inf, HighRail: 1, LowRail: Ground, HighMargin: -10, LowMargin: -10}}}
	for _, rate := range []float64{20e3, 192e3, 3e6} {
		c, err := Compile(n, Operating{Volts: make([]float64, 6), Sources: make([]float64, 1)}, rate, nil)
		if err != nil {
			t.Fatal(err)
		}
		poles := c.Poles()
		if len(poles) != 2 {
			t.Fatalf("poles at %g Hz: %v", rate, poles)
		}
		w := cmplx.Abs(poles[0])
		closeTo(t, "f0", w/(2*math.Pi), 8723.75941, 1e-4)
		closeTo(t, "Q", -w/(2*real(poles[0])), 0.74161984871, 1e-8)
	}
}

// A time constant far below a step, on an amplifier's output, could ring from step to step when a limit lets go, as the
// trapezoidal rule does on stiff poles. The source is continuous, so that a kink is all there is to set it off: what
// alternates then is 0.3 mV here at its worst, a five-thousandth of the swing. Ro = 200 Ω into 10 pF is 2 ns, 1/160 of
// a step.
func TestStiffPolesDoNotRing(t *testing.T) {
	n, at := follower(1e6, 0.4e6, -0.9, 0.8)
	n.Amplifiers[0].OutputResistance = 200
	n.Capacitors = []Branch{{3, Ground, 10e-12}}
	c, err := Compile(n, at, 3072e3, []int{3})
	if err != nil {
		t.Fatal(err)
	}
	s, y := c.Start(), make([]float64, 1)
	var last [3]float64
	worst, touched := 0., 0
	for i := range 12000 {
		if c.Step(s, []float64{0, 2 * math.Sin(2*math.Pi*1000*float64(i)/3072e3)}, y) {
			touched++
		}
		if i > 3 {
			// What alternates: (y0 − 3·y1 + 3·y2 − y3)/8 passes only that, and the third difference of what is smooth.
			worst = math.Max(worst, math.Abs(last[2]-3*last[1]+3*last[0]-y[0])/8)
		}
		last = [3]float64{y[0], last[0], last[1]}
	}
	if touched < 1000 || !(worst < 4e-4) {
		t.Errorf("%d steps limited, %.3g V alternate", touched, worst)
	}
}

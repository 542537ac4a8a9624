package bilinear

import (
	"math"
	"testing"
)

// The tables below are closed forms of idealised limiters, checked against quadrature to ten digits. The circuits that
// are held against them are followers and inverting stages with amplifiers that approach the ideal: no output
// resistance, no slew limit, a gain-bandwidth far above the tone.

// follower is an amplifier that follows node 2, with node 1 the rail; all at rest at 0 V.
func follower(gbw, slew, low, high float64) (Network, Operating) {
	return Network{Nodes: 4, Drives: []int{1, 2}, Amplifiers: []Amplifier{{
		Plus: 2, Minus: 3, Out: 3, GainBandwidth: gbw, OpenLoopGain: math.Inf(1), SlewRate: slew,
		HighRail: 1, LowRail: Ground, HighMargin: -high, LowMargin: low,
	}}}, Operating{Volts: make([]float64, 4), Sources: make([]float64, 1)}
}

// harmonics returns the amplitudes of the sine and cosine terms of one period of y: dc, then n = 1, 2, ….
func harmonics(y []float64, most int) (dc float64, sin, cos []float64) {
	n := float64(len(y))
	sin, cos = make([]float64, most+1), make([]float64, most+1)
	for i, v := range y {
		dc += v / n
		for h := 1; h <= most; h++ {
			s, c := math.Sincos(2 * math.Pi * float64(h) * (float64(i) + 0.5) / n)
			sin[h] += 2 * v * s / n
			cos[h] += 2 * v * c / n
		}
	}
	return dc, sin, cos
}

// period steps the network through periods of a tone whose instants lie half a step off its zeros, and returns the
// watched node over the last.
func period(t *testing.T, n Network, at Operating, watch int, wave func(turn float64) float64, perPeriod, periods int, hz float64) []float64 {
	t.Helper()
	c, err := Compile(n, at, hz*float64(perPeriod), []int{watch})
	if err != nil {
		t.Fatal(err)
	}
	s, y, out := c.Start(), make([]float64, 1), make([]float64, perPeriod)
	for i := range periods * perPeriod {
		c.Step(s, []float64{0, wave((float64(i) + 0.5) / float64(perPeriod))}, y)
		out[i%perPeriod] = y[0]
	}
	return out
}

// clipTolerance is what the finite gain-bandwidth, 5000 times the tone, leaves of the ideal corner: the source lags by
// 1/5000 rad, and comes off the limit as much later.
const clipTolerance = 3e-4

// Symmetric hard clipping of sin θ at ±c: b1 = (2/π)(asin c + c√(1−c²)), higher ones in closed form.
func TestClippingHasItsHarmonics(t *testing.T) {
	for _, r := range []struct{ c, b1, b3, b5, b7, b9 float64 }{
		{0.9, 0.962613926532, 0.0316345582866, -0.0220176525675, 0.0115077484601, -0.00295181641578},
		{0.8, 0.895911961338, 0.0733385977767, -0.0310955654573, 0.000318499053202, 0.00908600688488},
		{0.5, 0.608997781044, 0.137832223855, 0.0275664447711, -0.00984515884682, -0.0137832223855},
		{0.25, 0.314962357526, 0.0963131943846, 0.0481565971923, 0.0253682074495, 0.0120391492981},
		{0.1, 0.12711142843, 0.0418062925975, 0.0244148748769, 0.016736850625, 0.0123096454626},
	} {
		n, at := follower(5e6, math.Inf(1), -r.c, r.c)
		y := period(t, n, at, 3, func(x float64) float64 { return math.Sin(2 * math.Pi * x) }, 100000, 2, 1000)
		_, sin, _ := harmonics(y, 9)
		for h, want := range map[int]float64{1: r.b1, 3: r.b3, 5: r.b5, 7: r.b7, 9: r.b9} {
			closeTo(t, "harmonic", sin[h], want, clipTolerance)
		}
	}
}

// Clipping of cos φ at +ct and −cb: DC and even harmonics appear (closed forms by G0, G1, Gn of acos c).
func TestOneSidedClippingHasItsHarmonics(t *testing.T) {
	for _, r := range []struct{ ct, cb, dc, f1, f2, f3, f4, f5 float64 }{
		{0.5, 1.0, -0.108997781044, 0.804498890522, -0.137832223855, -0.0689161119277, -0.0137832223855, 0.0137832223855},
		{0.8, 1.0, -0.027119719951, 0.947955980669, -0.0458366236105, -0.0366692988884, -0.0260352022107, -0.0155477827287},
		{0.5, 0.8, -0.0818780610933, 0.752454871191, -0.091995600245, -0.105585410816, 0.0122519798252, -0.00176456034313},
		{0.9, 0.6, 0.0680091689218, 0.838928473333, 0.0910750198804, -0.0810071438337, 0.0116390371263, -0.00944426953116},
	} {
		n, at := follower(5e6, math.Inf(1), -r.cb, r.ct)
		y := period(t, n, at, 3, func(x float64) float64 { return math.Cos(2 * math.Pi * x) }, 100000, 2, 1000)
		dc, _, cos := harmonics(y, 5)
		closeTo(t, "dc", dc, r.dc, clipTolerance)
		for h, want := range map[int]float64{1: r.f1, 2: r.f2, 3: r.f3, 4: r.f4, 5: r.f5} {
			closeTo(t, "harmonic", cos[h], want, clipTolerance)
		}
	}
}

// slewTolerance is the last digit of the simulated table (±2 of its fourth), and the lag of a gain-bandwidth of 1000
// times the tone.
const slewTolerance = 2e-3

// An ideal slew limiter driven by a sine of peak 1, x = SR/ω: peak and fundamental, simulated with 20 000 steps a
// period; below x = 0.537 a triangle of peak (π/2)·x, fundamental (8/π²) of that.
func TestSlewingHasItsTable(t *testing.T) {
	const hz = 1000
	for _, r := range []struct{ x, peak, fundamental float64 }{
		{0.9, 1.0, 0.9903}, {0.8, 1.0, 0.9491}, {0.7, 0.9969, 0.8717}, {0.6, 0.9279, 0.7626}, {0.55, 0.8633, 0.7003},
		{0.5, 0.7853, 0.6366}, {0.4, 0.6283, 0.5093}, {0.3, 0.4713, 0.382}, {0.2, 0.3142, 0.2546},
	} {
		n, at := follower(1e6, r.x*2*math.Pi*hz, math.Inf(-1), math.Inf(1))
		y := period(t, n, at, 3, func(x float64) float64 { return math.Sin(2 * math.Pi * x) }, 20000, 8, hz)
		peak := 0.
		for _, v := range y {
			peak = math.Max(peak, math.Abs(v))
		}
		_, sin, cos := harmonics(y, 1)
		closeTo(t, "peak", peak, r.peak, slewTolerance)
		closeTo(t, "fundamental", math.Hypot(sin[1], cos[1]), r.fundamental, slewTolerance)
	}
}

// Full-power bandwidth f = SR/(2πVp), several handbooks: a follower slews just beyond it and not below.
func TestFullPowerBandwidth(t *testing.T) {
	for _, r := range []struct{ slew, peak, hz float64 }{{500000, 10, 7957.74715459}, {550000, 2.3, 38058.7907394}, {1000000, 2.5, 63661.9772368}} {
		for _, by := range []float64{0.97, 1.03} {
			// At ten thousand times the tone the source's slope is the tone's own within 1e-4.
			n, at := follower(1e4*r.hz, r.slew, math.Inf(-1), math.Inf(1))
			c, err := Compile(n, at, 2000*r.hz, nil)
			if err != nil {
				t.Fatal(err)
			}
			s, slews := c.Start(), 0
			for i := range 8000 {
				// Rising slowly, so that the start does not slew.
				a := r.peak * math.Min(1, float64(i)/4000)
				if c.Step(s, []float64{0, a * math.Cos(2*math.Pi*by*float64(i)/2000)}, nil) {
					slews++
				}
			}
			if (slews > 0) != (by > 1) {
				t.Errorf("%g V/s, %g V: %d steps slew at %g times %g Hz", r.slew, r.peak, slews, by, r.hz)
			}
		}
	}
}

// AC-coupled inverting stage in clipping: the coupling capacitor shifts by d until its mean current is 0, and after the
// overload the output stands at (R2/R1)·d and decays with R1·C; where that is beyond the limit V it first stays there
// for (R1+R2)·C·ln((|d|+V)/(V·R1/R2+V)). Closed form for a large C, checked by quadrature.
func TestCouplingCapacitorShiftsAndRecovers(t *testing.T) {
	const (
		hz   = 20000 // far above 1/(R1·C): the ripple on the capacitor is about a hundredth of d
		rate = 400 * hz
	)
	for _, r := range []struct{ a, r1, r2, vp, vn, c, d, still, to1mV float64 }{
		{1.0, 10000, 100000, 1.5, 1.0, 1e-6, -0.1276876183, 0.00273449009, 0.0718120429},
		{0.5, 10000, 100000, 1.6, 1.2, 1e-6, -0.0581525505, 0, 0.0636565483},
		{2.0, 10000, 100000, 1.55, 1.6, 1e-6, 0.01581056998, 0, 0.050632638},
	} {
		n := Network{Nodes: 6, Resistors: []Branch{{3, 4, r.r1}, {4, 5, r.r2}}, Capacitors: []Branch{{2, 3, r.c}}, Drives: []int{1, 2},
			Amplifiers: []Amplifier{{Plus: Ground, Minus: 4, Out: 5, GainBandwidth: math.Inf(1), OpenLoopGain: math.Inf(1), SlewRate: math.Inf(1), HighRail: 1, LowRail: Ground, HighMargin: -r.vp, LowMargin: -r.vn}}}
		at := Operating{Volts: make([]float64, 6), Sources: make([]float64, 1)}
		c, err := Compile(n, at, rate, []int{5, 3})
		if err != nil {
			t.Fatal(err)
		}
		s, y := c.Start(), make([]float64, 2)
		steady := int(12*(r.r1+r.r2)*r.c*hz) * (rate / hz) // whole periods, twelve of the slower time constant
		mean := 0.
		// The sound stops a quarter of a period later, when the ripple, a quarter behind the current, is at its mean.
		for i := 1; i <= steady+rate/hz/4; i++ {
			u := r.a * math.Sin(2*math.Pi*hz*float64(i)/rate)
			c.Step(s, []float64{0, u}, y)
			if i > steady-rate/hz && i <= steady {
				mean += (u - y[1]) / (rate / hz) // the voltage across the capacitor
			}
		}
		// d is the table's shift of the input against the capacitor.
		if !(math.Abs(-mean-r.d) <= 2e-3*math.Abs(r.d)+1e-5) && !(math.Abs(mean-r.d) <= 2e-3*math.Abs(r.d)+1e-5) {
			t.Errorf("A = %g, limits +%g −%g: the capacitor shifts by %.6f V, want %.6f V", r.a, r.vp, r.vn, mean, r.d)
		}
		stuck, settled := 0., 0.
		for i := 1; float64(i)/rate < 2*r.to1mV; i++ {
			touched := c.Step(s, []float64{0, 0}, y)
			now := float64(i) / rate
			if touched {
				stuck = now
			}
			if math.Abs(y[0]) > 1e-3 {
				settled = now
			}
		}
		if !(math.Abs(stuck-r.still) <= 0.01*r.still+2./rate) {
			t.Errorf("A = %g: stays at the limit for %.6f s, want %.6f s", r.a, stuck, r.still)
		}
		if !(math.Abs(settled-r.to1mV) <= 5e-3*r.to1mV) {
			t.Errorf("A = %g: within 1 mV after %.6f s, want %.6f s", r.a, settled, r.to1mV)
		}
	}
}

// An electret's transistor neither runs backwards nor pulls its drain below its lowest voltage.
func TestCapsuleStaysWithinItsLimits(t *testing.T) {
	n := Network{Nodes: 4, Resistors: []Branch{{1, 3, 2200}, {3, Ground, 10e3}}, Drives: []int{1, 2},
		Capsules: []Capsule{{Drain: 3, Minimum: 0.5, Current: 0.3e-3, Signal: 1}}}
	at, err := SolveRest(n, []float64{3.3, 0})
	if err != nil {
		t.Fatal(err)
	}
	share := 10e3 / (10e3 + 2200)
	open := 3.3 * share // with no drain current
	closeTo(t, "rest", at.Volts[3], open-0.3e-3*2200*share, 1e-12)
	c, err := Compile(n, at, 48000, []int{3})
	if err != nil {
		t.Fatal(err)
	}
	s, y := c.Start(), make([]float64, 1)
	for _, r := range []struct {
		current, want float64
		piece         Piece
	}{{0.1e-3, open - 0.4e-3*2200*share, Linear}, {-0.3e-3, open, Linear}, {-0.5e-3, open, CutOff}, {3e-3, 0.5, Saturated}, {0, open - 0.3e-3*2200*share, Linear}} {
		c.Step(s, []float64{0, r.current}, y)
		closeTo(t, "drain", y[0]+at.Volts[3], r.want, 1e-9)
		if s.Pieces[0] != r.piece {
			t.Errorf("at %g A: piece %d, want %d", r.current, s.Pieces[0], r.piece)
		}
	}
}

// A diode conducts beyond its forward voltage, across its resistance.
func TestDiodesClamp(t *testing.T) {
	n := Network{Nodes: 4, Resistors: []Branch{{2, 3, 1000}}, Drives: []int{1, 2},
		Diodes: []Diode{{Anode: 3, Cathode: 1, Forward: 0.3, Resistance: 100}, {Anode: Ground, Cathode: 3, Forward: 0.3}}}
	at, err := SolveRest(n, []float64{3.3, 1})
	if err != nil {
		t.Fatal(err)
	}
	c, err := Compile(n, at, 48000, []int{3})
	if err != nil {
		t.Fatal(err)
	}
	s, y := c.Start(), make([]float64, 1)
	for _, r := range []struct{ in, want float64 }{{2, 2}, {3.6, 3.6}, {4.7, 3.6 + 1.1*100/1100}, {-0.2, -0.2}, {-5, -0.3}, {1, 1}} {
		c.Step(s, []float64{0, r.in - 1}, y)
		closeTo(t, "clamped", y[0]+at.Volts[3], r.want, 1e-9)
	}
}

// Facts of the trade (common practice, no source) and hand calculation.
func TestRestPoints(t *testing.T) {
	inf := math.Inf(1)
	rail := Amplifier{GainBandwidth: 1e6, OpenLoopGain: 1e5, SlewRate: inf, HighRail: 1, LowRail: Ground, HighMargin: 0.02, LowMargin: 0.02}
	amplifier := func(plus, minus, out int) Amplifier {
		a := rail
		a.Plus, a.Minus, a.Out = plus, minus, out
		return a
	}
	// An equal divider on 5 V rests at 2.5 V, and so does the stage that rides on it.
	coupled := Network{Nodes: 6, Resistors: []Branch{{1, 2, 22e3}, {2, Ground, 22e3}, {4, 5, 10e3}}, Capacitors: []Branch{{3, 4, 1e-6}},
		Drives: []int{1, 3}, Amplifiers: []Amplifier{amplifier(2, 4, 5)}}
	at, err := SolveRest(coupled, []float64{5, 0})
	if err != nil {
		t.Fatal(err)
	}
	closeTo(t, "divider", at.Volts[2], 2.5, 1e-12)
	closeTo(t, "stage", at.Volts[5], 2.5, 1e-4)
	// A summer on 1.65 V with two direct-coupled sources at 0 V asks for 3·1.65 V and is stuck at its upper limit.
	summer := Network{Nodes: 7, Resistors: []Branch{{1, 2, 22e3}, {2, Ground, 22e3}, {3, 5, 10e3}, {4, 5, 10e3}, {5, 6, 10e3}},
		Drives: []int{1, 3, 4}, Amplifiers: []Amplifier{amplifier(2, 5, 6)}}
	at, err = SolveRest(summer, []float64{3.3, 0, 0})
	if err != nil {
		t.Fatal(err)
	}
	closeTo(t, "stuck summer", at.Volts[6], 3.28, 1e-12)
	closeTo(t, "its (−)", at.Volts[5], 3.28/3, 1e-12)
	// A microampere into a pin pulls a 100 kΩ ∥ 100 kΩ divider down by 50 mV.
	pulled := Network{Nodes: 3, Resistors: []Branch{{1, 2, 100e3}, {2, Ground, 100e3}}, Drives: []int{1}, Currents: []Current{{2, Ground}}}
	at, err = SolveRest(pulled, []float64{5, 1e-6})
	if err != nil {
		t.Fatal(err)
	}
	closeTo(t, "pulled", at.Volts[2], 2.45, 1e-12)
	// A node behind a capacitor alone has no rest.
	floating := Network{Nodes: 3, Capacitors: []Branch{{1, 2, 1e-6}}, Drives: []int{1}}
	if _, err := SolveRest(floating, []float64{5}); err == nil {
		t.Error("a floating node rests")
	}
}

package bilinear

import (
	"math"
	"testing"
)

// The overloaded circuits are also solved independently here: their equations derived by hand, stepped by the classical
// Runge-Kutta method (RK4) in steps far below every time constant.

const (
	fineStep = 2.5e-9 // s; halving it moves the solutions by less than −140 dB of swing
	coarse   = 6144e3 // Hz, the internal rate of a run of a 48 kHz track
)

// limited is the slope of an internal source: slew-limited, and nothing beyond a rail that it has reached.
func limited(e, slope, slew, low, high float64) float64 {
	slope = math.Max(-slew, math.Min(slew, slope))
	if e >= high && slope > 0 || e <= low && slope < 0 {
		return 0
	}
	return slope
}

// twoStages is an inverting stage with input coupling into a unity-gain Sallen-Key low-pass, amplifiers with an output
// resistance. State: voltages of c_in, c_f (from (−) to the output), c_1 (middle to output), c_2, then e of both.
type twoStages struct {
	rIn, cIn, rF, cF, r1, r2, c1, c2 float64
	ro, gbw, gain, slew              float64
	low, high                        float64 // V from rest, of both
}

// outputs solves Kirchhoff's current law at the two output nodes.
func (t *twoStages) outputs(x []float64, u float64) (o1, o2 float64) {
	vCin, vCf, vC1, vC2, e1, e2 := x[0], x[1], x[2], x[3], x[4], x[5]
	// (e1−o1)/ro + (u−vCin−o1−vCf)/rIn = (o1−o2−vC1)/r1
	// (e2−o2)/ro + (o1−o2−vC1)/r1 − (o2+vC1−vC2)/r2 = 0
	a11, a12, b1 := 1/t.ro+1/t.rIn+1/t.r1, -1/t.r1, e1/t.ro+(u-vCin-vCf)/t.rIn+vC1/t.r1
	a21, a22, b2 := -1/t.r1, 1/t.ro+1/t.r1+1/t.r2, e2/t.ro-vC1/t.r1-(vC1-vC2)/t.r2
	d := a11*a22 - a12*a21
	return (b1*a22 - a12*b2) / d, (a11*b2 - a21*b1) / d
}

func (t *twoStages) slope(dx, x []float64, u float64) {
	o1, o2 := t.outputs(x, u)
	minus, middle := o1+x[1], o2+x[2]
	iIn := (u - x[0] - minus) / t.rIn
	i1 := (o1-middle)/t.r1 - (middle-x[3])/t.r2
	dx[0] = iIn / t.cIn
	dx[1] = (iIn - x[1]/t.rF) / t.cF
	dx[2] = i1 / t.c1
	dx[3] = (middle - x[3]) / t.r2 / t.c2
	w := 2 * math.Pi * t.gbw
	vref := (t.low + t.high) / 2
	dx[4] = limited(x[4], w*(0-minus)-w/t.gain*(x[4]-vref)-w/t.gain*vref, t.slew, t.low, t.high)
	dx[5] = limited(x[5], w*(x[3]-o2)-w/t.gain*(x[5]-vref)-w/t.gain*vref, t.slew, t.low, t.high)
}

// rk4 steps x by fineStep; sources are held to their rails.
func (t *twoStages) rk4(x []float64, u func(s float64) float64, at float64) {
	const n = 6
	var k1, k2, k3, k4, y [n]float64
	t.slope(k1[:], x, u(at))
	for i := range n {
		y[i] = x[i] + fineStep/2*k1[i]
	}
	t.slope(k2[:], y[:], u(at+fineStep/2))
	for i := range n {
		y[i] = x[i] + fineStep/2*k2[i]
	}
	t.slope(k3[:], y[:], u(at+fineStep/2))
	for i := range n {
		y[i] = x[i] + fineStep*k3[i]
	}
	t.slope(k4[:], y[:], u(at+fineStep))
	for i := range n {
		x[i] += fineStep / 6 * (k1[i] + 2*k2[i] + 2*k3[i] + k4[i])
	}
	for i := 4; i < n; i++ {
		x[i] = math.Max(t.low, math.Min(t.high, x[i]))
	}
}

// network returns the same circuit for the compiler, around a rest of all zeros: node 1 is a rail that stays at 0,
// 2 the input, 3 behind c_in, 4 (−), 5 the first output, 6 the middle, 7 (+), 8 the second output.
func (t *twoStages) network() (Network, Operating) {
	amplifier := func(plus, minus, out int) Amplifier {
		return Amplifier{Plus: plus, Minus: minus, Out: out, GainBandwidth: t.gbw, OpenLoopGain: t.gain, OutputResistance: t.ro,
			SlewRate: t.slew, HighRail: 1, LowRail: Ground, HighMargin: -t.high, LowMargin: t.low}
	}
	return Network{
		Nodes:      9,
		Resistors:  []Branch{{3, 4, t.rIn}, {4, 5, t.rF}, {5, 6, t.r1}, {6, 7, t.r2}},
		Capacitors: []Branch{{2, 3, t.cIn}, {4, 5, t.cF}, {6, 8, t.c1}, {7, Ground, t.c2}},
		Drives:     []int{1, 2},
		Amplifiers: []Amplifier{amplifier(Ground, 4, 5), amplifier(7, 8, 8)},
	}, Operating{Volts: make([]float64, 9), Sources: make([]float64, 2)}
}

// tone is a sum of two sines that both begin at 0.
func tone(f1, a1, f2, a2 float64) func(s float64) float64 {
	return func(s float64) float64 {
		return a1*math.Sin(2*math.Pi*f1*s) + a2*math.Sin(2*math.Pi*f2*s)
	}
}

// The error is of second order, 12 dB for twice the rate, but it starts higher than the linear circuit's: leaving a rail
// costs more, and the more so the faster the source leaves it. What is allowed is what a run promises at its least
// internal rate.
func TestOverloadedTwoStagesMatchRungeKutta(t *testing.T) {
	bipolar := twoStages{rIn: 10e3, cIn: 1e-6, rF: 68e3, cF: 33e-12, r1: 9.1e3, r2: 9.1e3, c1: 2.2e-9, c2: 1e-9,
		ro: 200, gbw: 1e6, gain: 1e5, slew: 0.4e6, low: -0.9, high: 0.8}
	fast := bipolar
	fast.gbw, fast.slew = 10e6, 5e6
	over := func(db float64) float64 { return 0.8 / 6.8 * math.Pow(10, db/20) } // V at the input, dB beyond the upper limit
	for _, c := range []struct {
		name    string
		circuit twoStages
		u       func(s float64) float64
		seconds float64
		allowed float64 // dB of swing
	}{
		{"1 kHz, 13 dB over", bipolar, tone(1000, over(13), 0, 0), 3e-3, -115},
		{"440 Hz and 3.1 kHz, 10 dB over", bipolar, tone(440, over(4), 3100, over(4)), 5e-3, -105},
		{"3 kHz, 13 dB over", bipolar, tone(3000, over(13), 0, 0), 2e-3, -105},
		{"9 kHz, 10 dB over", bipolar, tone(9000, over(10), 0, 0), 1e-3, -99},
		{"1 kHz, 13 dB over, fast amplifiers", fast, tone(1000, over(13), 0, 0), 2e-3, -115},
		{"3 kHz, 13 dB over, fast amplifiers", fast, tone(3000, over(13), 0, 0), 1e-3, -105},
	} {
		t.Run(c.name, func(t *testing.T) {
			n, at := c.circuit.network()
			compiled, err := Compile(n, at, coarse, []int{5, 8})
			if err != nil {
				t.Fatal(err)
			}
			s, y := compiled.Start(), make([]float64, 2)
			x, fine := make([]float64, 6), 0
			touched := 0
			var sum, low, high [2]float64
			steps := int(c.seconds * coarse)
			for i := 1; i <= steps; i++ {
				now := float64(i) / coarse
				if compiled.Step(s, []float64{0, c.u(now)}, y) {
					touched++
				}
				for ; float64(fine+1)*fineStep <= now+1e-15; fine++ {
					c.circuit.rk4(x, c.u, float64(fine)*fineStep)
				}
				// What is left to the instant, at the slope there: below 10 ns of it.
				rest := now - float64(fine)*fineStep
				ahead, dx := append([]float64(nil), x...), make([]float64, 6)
				c.circuit.slope(dx, x, c.u(float64(fine)*fineStep))
				for k := range ahead {
					ahead[k] += rest * dx[k]
				}
				o1, o2 := c.circuit.outputs(ahead, c.u(now))
				for k, want := range [...]float64{o1, o2} {
					sum[k] += (y[k] - want) * (y[k] - want)
					low[k], high[k] = math.Min(low[k], want), math.Max(high[k], want)
				}
			}
			if touched < steps/10 {
				t.Fatalf("only %d of %d steps were limited", touched, steps)
			}
			for k := range sum {
				db := 20 * math.Log10(math.Sqrt(sum[k]/float64(steps))/(high[k]-low[k]))
				t.Logf("output %d: %.1f dB of swing", k+1, db)
				if !(db <= c.allowed) {
					t.Errorf("output %d is %.1f dB of swing off, %.0f allowed", k+1, db, c.allowed)
				}
			}
		})
	}
}

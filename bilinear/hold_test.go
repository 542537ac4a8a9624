package bilinear

import (
	"math"
	"slices"
	"testing"
)

// While the elements of an overloaded circuit stay on their pieces, the held map is what stepping does; and its conditions,
// looked at at every step, are kept exactly as long as they stay.
func TestHeldIsSteppedWhileThePiecesHold(t *testing.T) {
	const (
		rate      = 6144e3
		block     = 16
		tolerance = 1e-12 // V, of values of some volts
	)
	circuit := twoStages{rIn: 10e3, cIn: 1e-6, rF: 68e3, cF: 33e-12, r1: 9.1e3, r2: 9.1e3, c1: 2.2e-9, c2: 1e-9,
		ro: 200, gbw: 1e6, gain: 1e5, slew: 0.1e6, low: -0.9, high: 0.8}
	n, at := circuit.network()
	c, err := Compile(n, at, rate, []int{5, 8})
	if err != nil {
		t.Fatal(err)
	}
	looks := make([]int, block)
	for i := range looks {
		looks[i] = i
	}
	readings := []Reading{{Step: block - 1, Of: Node, Item: 1}, {Step: 5, Of: Source, Item: 0}, {Step: 9, Of: Slope, Item: 1}, {Step: 3, Of: Sense, Item: 0}}
	held := map[string]*Held{}
	s, y, before := c.Start(), make([]float64, 2), make([]float64, 2)
	u := tone(3000, 0.6, 11e3, 0.3)
	stayed, left := map[string]int{}, 0
	for b := range 1500 {
		pieces := slices.Clone(s.Pieces)
		key := string([]byte{byte(pieces[0]), byte(pieces[1])})
		h := held[key]
		if h == nil {
			h = c.Hold(pieces, block, looks, readings)
			held[key] = h
		}
		x, in := make([]float64, c.States()), make([]float64, block)
		c.Pack(x, s)
		for j := range in {
			// The rail, which is input 0, moves too.
			in[j] = u(float64(b*block+j) / rate)
		}
		rail := func(j int) float64 { return 0.02 * math.Sin(2*math.Pi*40e3*float64(b*block+j)/rate) }
		supply := make([]float64, block)
		for j := range supply {
			supply[j] = rail(j)
		}
		rows := slices.Clone(h.Constant)
		Apply(rows, h.FromState, x)
		Apply(rows, h.FromInput[0], supply)
		Apply(rows, h.FromInput[1], in)
		conditions := rows[c.States() : c.States()+len(h.Most)*block]
		kept := true
		for i, most := range h.Most {
			for _, v := range conditions[i*block : (i+1)*block] {
				kept = kept && v >= 0 && v <= most
			}
		}
		var read []float64
		stays := true
		for j := range block {
			copy(before, s.H)
			c.Step(s, []float64{supply[j], in[j]}, y)
			stays = stays && slices.Equal(s.Pieces, pieces)
			switch j {
			case 3:
				read = append(read, c.senseOf(s, 0))
			case 5:
				read = append(read, s.E[0])
			case 9:
				read = append(read, s.E[1]-before[1])
			case block - 1:
				read = append(read, y[1])
			}
		}
		if kept != stays {
			t.Fatalf("block %d on %v: the conditions say %v, stepping %v", b, pieces, kept, stays)
		}
		if !stays {
			left++
			continue
		}
		stayed[key]++
		after := make([]float64, c.States())
		c.Pack(after, s)
		for i := range after {
			after[i] -= rows[i]
		}
		if d := c.Size(after); !(d <= tolerance) {
			t.Fatalf("block %d on %v: the state is %.3g V off", b, pieces, d)
		}
		told := rows[c.States()+len(conditions):]
		for i, k := range []int{3, 1, 2, 0} { // in the order of the steps
			if d := math.Abs(told[k] - read[i]); !(d <= tolerance) {
				t.Fatalf("block %d on %v: reading %d is %.3g off", b, pieces, k, d)
			}
		}
	}
	if left < 20 || len(stayed) < 6 {
		t.Errorf("left its pieces in %d blocks, stayed on %d combinations: too few to tell", left, len(stayed))
	}
}

package resample

import (
	"errors"
	"fmt"
	"io"
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// part reads a split to its end: what lies below, and the rest.
func part(t testing.TB, s *Split) (low, high []float64) {
	t.Helper()
	l, whole := make([]float64, 1000), make([]float64, 1000)
	for {
		n, err := s.Read(l, whole)
		low = append(low, l[:n]...)
		for i, v := range whole[:n] {
			high = append(high, v-l[i])
		}
		if errors.Is(err, io.EOF) {
			return low, high
		}
		if err != nil {
			t.Fatal(err)
		}
	}
}

// A tone below 0.99 of the edge lies below, one above 1.01 of it above, one at the edge half here and half there.
func TestSplitTones(t *testing.T) {
	for _, c := range []struct{ rate, edge float64 }{{48000, 8000}, {48000, 4000}, {44100, 16000}, {96000, 2000}} {
		for _, at := range []float64{0.01, 0.5, 0.9, 0.99, 1, 1.01, 1.1, 1.3} {
			if at*c.edge >= c.rate/2 {
				continue
			}
			t.Run(fmt.Sprintf("%g-%g-%g", c.rate, c.edge, at), func(t *testing.T) {
				half := NewSplit(nil, c.rate, c.edge, 0).HalfLength()
				n := 2*half + 200
				x := samples(n, func(j int) float64 { return math.Sin(2 * math.Pi * at * c.edge / c.rate * float64(j)) })
				source := slices.Clone(*x)
				low, high := part(t, NewSplit(x, c.rate, c.edge, 0))
				want := [2]float64{1, 0}
				tolerance := inaudible
				switch {
				case at > 1:
					want = [2]float64{0, 1}
				case at == 1:
					want = [2]float64{0.5, 0.5}
					tolerance = 1e-4 // the slope is 0.5 per 1 % of the edge; a Kaiser window is symmetric to much less
				}
				for i := half; i < half+200; i++ {
					if d := math.Abs(low[i] - want[0]*source[i]); !(d <= tolerance) {
						t.Fatalf("below: value %d is off by %g", i, d)
					}
					if d := math.Abs(high[i] - want[1]*source[i]); !(d <= tolerance) {
						t.Fatalf("above: value %d is off by %g", i, d)
					}
				}
			})
		}
	}
}

// Beside what lies below comes the stream itself, before, within and behind it.
func TestSplitGivesTheStream(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		rate := 48000.
		edge := rapid.Float64Range(1000, 30000).Draw(t, "edge")
		n := rapid.IntRange(0, 9000).Draw(t, "n")
		lead := rapid.IntRange(0, 3000).Draw(t, "lead")
		x := noise(n)
		source := slices.Clone(*x)
		s := NewSplit(x, rate, edge, lead)
		var low, whole []float64
		chopped(t, func(n int) (int, error) {
			l, w := make([]float64, n), make([]float64, n)
			n, err := s.Read(l, w)
			low, whole = append(low, l[:n]...), append(whole, w[:n]...)
			return n, err
		})
		if want := lead + n + s.HalfLength(); len(low) != want || len(whole) != want {
			t.Fatalf("%d and %d values, want %d", len(low), len(whole), want)
		}
		if (s.HalfLength() == 0) != (edge >= rate/2) {
			t.Fatalf("half length %d", s.HalfLength())
		}
		for i := range low {
			v := 0.
			if j := i - lead; j >= 0 && j < n {
				v = source[j]
			}
			if whole[i] != v {
				t.Fatalf("value %d is %g beside the stream's %g", i, whole[i], v)
			}
			if edge >= rate/2 && low[i] != v {
				t.Fatalf("value %d: %g lies above half the rate", i, v-low[i])
			}
		}
		again := slices.Clone(source)
		once := make([]float64, len(low))
		if n, _ := NewSplit(&again, rate, edge, lead).Read(once, make([]float64, len(low))); !slices.Equal(once[:n], low) {
			t.Fatal("read at once, it has other bits")
		}
	})
}

// The response to an impulse is symmetric, ends where HalfLength says, and holds all of a constant.
func TestSplitImpulse(t *testing.T) {
	const rate, edge, at = 48000, 4000, 777
	half := NewSplit(nil, rate, edge, 0).HalfLength()
	low, _ := part(t, NewSplit(samples(at+half+100, func(j int) float64 {
		if j == at {
			return 1
		}
		return 0
	}), rate, edge, half))
	middle, sum := half+at, 0.
	// The transform's twiddle factors come by successive multiplication, which leaves about 10⁻¹³ of the largest.
	const rounding = 1e-13
	for i, v := range low {
		sum += v
		if beyond := i < at || i > at+2*half; beyond && !(math.Abs(v) <= rounding) {
			t.Fatalf("%g at %d, beyond half the length", v, i-middle)
		}
		if mirror := 2*middle - i; mirror >= 0 && mirror < len(low) && !(math.Abs(v-low[mirror]) <= rounding) {
			t.Fatalf("%g at %d but %g on the other side", v, i-middle, low[mirror])
		}
	}
	if !(math.Abs(sum-1) <= 1e-11) { // as many roundings as values
		t.Errorf("a constant comes out as %g", sum)
	}
	if low[at] == 0 {
		t.Error("the response begins later than half its length before the impulse")
	}
}

func BenchmarkSplit(b *testing.B) {
	for _, c := range []struct{ rate, edge float64 }{{48000, 8000}, {48000, 4000}, {48000, 500}, {192000, 4000}} {
		b.Run(fmt.Sprintf("%g-%g", c.rate, c.edge), func(b *testing.B) {
			s := NewSplit(&endless{values: *noise(4096)}, c.rate, c.edge, 0)
			low, high := make([]float64, 8192), make([]float64, 8192)
			for b.Loop() {
				if _, err := s.Read(low, high); err != nil {
					b.Fatal(err)
				}
			}
			perSecond(b, float64(b.N*len(low)), c.rate)
		})
	}
}

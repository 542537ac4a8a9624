package preferred

import (
	"math"
	"strconv"
	"testing"

	"pgregory.net/rapid"
)

// The series as IEC 60063:2015 lists them; E96 and E192 by their marks: first, last, and where slips are made.
func TestSeriesAreThoseOfIEC60063(t *testing.T) {
	for _, c := range []struct {
		s    Series
		want []int
	}{
		{E3, []int{100, 220, 470}},
		{E6, []int{100, 150, 220, 330, 470, 680}},
		{E12, []int{100, 120, 150, 180, 220, 270, 330, 390, 470, 560, 680, 820}},
		{E24, []int{100, 110, 120, 130, 150, 160, 180, 200, 220, 240, 270, 300, 330, 360, 390, 430, 470, 510, 560, 620, 680, 750, 820, 910}},
		{E48, []int{100, 105, 110, 115, 121, 127, 133, 140, 147, 154, 162, 169, 178, 187, 196, 205, 215, 226, 237, 249, 261, 274, 287, 301, 316, 332, 348, 365, 383, 402, 422, 442, 464, 487, 511, 536, 562, 590, 619, 649, 681, 715, 750, 787, 825, 866, 909, 953}},
		{E96, []int{100, 102, 105, 107, 110, 113, 115, 118, 121, 124, 127, 130, 133, 137, 140, 143, 147, 150, 154, 158, 162, 165, 169, 174, 178, 182, 187, 191, 196, 200, 205, 210, 215, 221, 226, 232, 237, 243, 249, 255, 261, 267, 274, 280, 287, 294, 301, 309, 316, 324, 332, 340, 348, 357, 365, 374, 383, 392, 402, 412, 422, 432, 442, 453, 464, 475, 487, 499, 511, 523, 536, 549, 562, 576, 590, 604, 619, 634, 649, 665, 681, 698, 715, 732, 750, 768, 787, 806, 825, 845, 866, 887, 909, 931, 953, 976}},
		{E192, []int{100, 101, 102, 104, 105, 106, 107, 109, 110, 111, 113, 114, 115, 117, 118, 120, 121, 123, 124, 126, 127, 129, 130, 132, 133, 135, 137, 138, 140, 142, 143, 145, 147, 149, 150, 152, 154, 156, 158, 160, 162, 164, 165, 167, 169, 172, 174, 176, 178, 180, 182, 184, 187, 189, 191, 193, 196, 198, 200, 203, 205, 208, 210, 213, 215, 218, 221, 223, 226, 229, 232, 234, 237, 240, 243, 246, 249, 252, 255, 258, 261, 264, 267, 271, 274, 277, 280, 284, 287, 291, 294, 298, 301, 305, 309, 312, 316, 320, 324, 328, 332, 336, 340, 344, 348, 352, 357, 361, 365, 370, 374, 379, 383, 388, 392, 397, 402, 407, 412, 417, 422, 427, 432, 437, 442, 448, 453, 459, 464, 470, 475, 481, 487, 493, 499, 505, 511, 517, 523, 530, 536, 542, 549, 556, 562, 569, 576, 583, 590, 597, 604, 612, 619, 626, 634, 642, 649, 657, 665, 673, 681, 690, 698, 706, 715, 723, 732, 741, 750, 759, 768, 777, 787, 796, 806, 816, 825, 835, 845, 856, 866, 876, 887, 898, 909, 920, 931, 942, 953, 965, 976, 988}},
	} {
		got := c.s.Decade()
		if len(got) != len(c.want) {
			t.Fatalf("%v has %d values, want %d", c.s, len(got), len(c.want))
		}
		for i, v := range got {
			if v != c.want[i] {
				t.Errorf("%v[%d] = %d, want %d", c.s, i, v, c.want[i])
			}
		}
	}
}

func TestNeighbours(t *testing.T) {
	for _, c := range []struct {
		s                    Series
		x, down, nearest, up float64
	}{
		{E24, 4700, 4300, 4700, 5100},
		{E24, 4701, 4700, 4700, 5100},
		{E24, 9.1, 8.2, 9.1, 10},
		{E24, 95e3, 91e3, 91e3, 100e3},
		{E24, 1e4, 9100, 1e4, 11e3},
		{E12, 4.7e-10, 3.9e-10, 4.7e-10, 5.6e-10},
		{E192, 919e3, 909e3, 920e3, 920e3},
		{E3, 330, 220, 470, 470},
	} {
		if got := c.s.Down(c.x); got != c.down {
			t.Errorf("%v.Down(%g) = %g, want %g", c.s, c.x, got, c.down)
		}
		if got := c.s.Nearest(c.x); got != c.nearest {
			t.Errorf("%v.Nearest(%g) = %g, want %g", c.s, c.x, got, c.nearest)
		}
		if got := c.s.Up(c.x); got != c.up {
			t.Errorf("%v.Up(%g) = %g, want %g", c.s, c.x, got, c.up)
		}
	}
}

func TestNeighboursLaws(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := rapid.SampledFrom(All()).Draw(t, "series")
		x := rapid.Float64Range(1e-15, 1e12).Draw(t, "x")
		if x < 1e-15 {
			return
		}
		down, near, up := s.Down(x), s.Nearest(x), s.Up(x)
		if !(down < x && x < up && down <= near && near <= up) {
			t.Fatalf("%v at %g: %g, %g, %g", s, x, down, near, up)
		}
		if s.Nearest(near) != near || s.Down(up) > x*(1+1e-6) {
			t.Fatalf("%v at %g: a preferred value is not its own neighbour", s, x)
		}
	})
}

func TestParse(t *testing.T) {
	for _, s := range All() {
		if got, err := Parse(s.String()); err != nil || got != s {
			t.Errorf("Parse(%q) = %v, %v", s.String(), got, err)
		}
	}
	if _, err := Parse("E25"); err == nil {
		t.Error(`Parse("E25") found a series`)
	}
}

// rounding is what the sum, or the product over the sum, of two decimal values may be off by.
const rounding = 1e-12

func TestPairsAreTheNearestOfAll(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := rapid.SampledFrom([]Series{E3, E6, E12, E24}).Draw(t, "series")
		x := math.Pow(10, rapid.Float64Range(-12, 9).Draw(t, "decade"))
		if rapid.Bool().Draw(t, "preferred") {
			x = s.Nearest(x)
		}
		var values []float64
		for v := s.Down(x / 2e3); v <= 2e3*x; v = s.Up(v) {
			values = append(values, v)
		}
		sum, share := math.Inf(1), math.Inf(1)
		for i, b := range values {
			for _, a := range values[i:] {
				if a <= 1000*b*(1+same) {
					sum = math.Min(sum, math.Abs((a+b)/x-1))
					share = math.Min(share, math.Abs(a*b/(a+b)/x-1))
				}
			}
		}
		gotSum, gotShare := s.Pairs(x)
		for _, c := range []struct {
			got         Pair
			makes, best float64
		}{
			{gotSum, gotSum.A + gotSum.B, sum},
			{gotShare, gotShare.A * gotShare.B / (gotShare.A + gotShare.B), share},
		} {
			p := c.got
			if !(p.A >= p.B && p.A <= 1000*p.B*(1+same) && s.Nearest(p.A) == p.A && s.Nearest(p.B) == p.B) {
				t.Fatalf("%v at %g: %+v is no pair of the series", s, x, p)
			}
			if !(math.Abs(p.Makes/c.makes-1) <= rounding && math.Abs(p.Makes/x-1) <= c.best+rounding) {
				t.Fatalf("%v at %g: %+v is off by %g, the nearest by %g", s, x, p, p.Makes/x-1, c.best)
			}
		}
	})
}

// Of 4k7 = 3k6 + 1k1 = 2k7 + 2k0 = …, the pair of closest values.
func TestPairsOfClosestValuesComeFirst(t *testing.T) {
	if sum, _ := E24.Pairs(4700); sum != (Pair{2700, 2000, 4700, true}) {
		t.Errorf("4700 is the sum %+v", sum)
	}
	if _, share := E12.Pairs(50); share != (Pair{100, 100, 50, false}) {
		t.Errorf("50 is the share %+v", share)
	}
}

// A value is the same number that its digits are: 4700 and 4.7e-10, not one beside it.
func TestValuesAreExact(t *testing.T) {
	for _, s := range All() {
		for power := -18; power <= 12; power++ {
			for _, figures := range s.Decade() {
				want, err := strconv.ParseFloat(strconv.Itoa(figures)+"e"+strconv.Itoa(power-2), 64)
				if err != nil {
					t.Fatal(err)
				}
				// One ulp off, as sums of rounded factors are, is still it.
				for _, x := range []float64{want, math.Nextafter(want, 0), math.Nextafter(want, math.Inf(1))} {
					if got := s.Nearest(x); got != want {
						t.Fatalf("%v.Nearest(%.17g) = %.17g, want %.17g", s, x, got, want)
					}
					if down, up := s.Down(x), s.Up(x); !(down < want && up > want) {
						t.Fatalf("%v at %.17g: %.17g, %.17g", s, x, down, up)
					}
				}
			}
		}
	}
}

func TestOutOfRangePanics(t *testing.T) {
	E192.Pairs(1e-26)
	E192.Pairs(1e26)
	for _, f := range []func(x float64){
		func(x float64) { E24.Nearest(x) }, func(x float64) { E24.Up(x) }, func(x float64) { E24.Down(x) }, func(x float64) { E24.Pairs(x) },
	} {
		for _, x := range []float64{0, -1, 1e31, 1e-31, math.Inf(1), math.NaN()} {
			func() {
				defer func() {
					if recover() != "preferred: value out of range" {
						t.Errorf("%g: no panic of ours", x)
					}
				}()
				f(x)
			}()
		}
	}
}

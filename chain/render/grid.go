package render

import (
	"math"

	"gonum.org/v1/gonum/blas/blas64"

	"midrail/signals/resample"
)

// grid lays a run out in blocks of whole conversions.
type grid struct {
	plan        Plan
	conversions int       // in a block
	base        int       // base samples in a block
	steps       int       // internal steps in a block
	kernel      []float64 // that takes the base rate to the internal rate
	reach       int       // base samples that it reaches to either side
}

func newGrid(p Plan, tracksRate float64) grid {
	g := grid{plan: p, conversions: max(1, blockBase/p.Base)}
	g.base = g.conversions * p.Base
	g.steps = g.base << p.Doublings
	g.kernel, g.reach = resample.Refinement(tracksRate/p.baseRate(), p.Doublings)
	return g
}

// window is how many base samples a block's steps are made from.
func (g grid) window() int { return g.base + 2*g.reach }

// refine puts the internal steps that a window of base samples makes into dst. The window begins reach−1 samples before
// the block's first instant at the base rate.
func (g grid) refine(dst, window []float64) {
	scale := 1 << g.plan.Doublings
	middle := g.reach * scale
	for j := range dst {
		// Step j lies (j+1)/scale base samples behind the block's start, which is the window's sample reach−1.
		at := (g.reach-1)*scale + j + 1
		sum := 0.
		for b := (at - middle + scale - 1) / scale; b*scale <= at+middle && b < len(window); b++ {
			sum = math.FMA(g.kernel[middle+at-b*scale], window[b], sum)
		}
		dst[j] = sum
	}
}

// fold returns m, whose columns are a block's internal steps, for the base samples that make them.
func (g grid) fold(m blas64.General) blas64.General {
	out := blas64.General{Rows: m.Rows, Cols: g.window(), Stride: g.window(), Data: make([]float64, m.Rows*g.window())}
	unit, steps := make([]float64, g.window()), make([]float64, g.steps)
	for b := range unit {
		unit[b] = 1
		g.refine(steps, unit)
		unit[b] = 0
		for r := range m.Rows {
			sum := 0.
			for j, v := range steps {
				sum = math.FMA(m.Data[r*m.Stride+j], v, sum)
			}
			out.Data[r*out.Stride+b] = sum
		}
	}
	return out
}

// means puts the means of the steps of each base sample into dst.
func (g grid) means(dst, steps []float64) {
	scale := 1 << g.plan.Doublings
	for i := range dst {
		sum := 0.
		for _, v := range steps[i*scale : (i+1)*scale] {
			sum += v
		}
		dst[i] = sum / float64(scale)
	}
}

// stairMeans adds the means of the steps of each base sample to dst.
func (g grid) stairMeans(dst []float64, t *stair) {
	scale := 1 << g.plan.Doublings
	for i := range dst {
		dst[i] += t.from
	}
	for _, c := range t.changes {
		cell := c.step / scale
		dst[cell] += c.by * float64((cell+1)*scale-c.step) / float64(scale)
		for i := cell + 1; i < len(dst); i++ {
			dst[i] += c.by
		}
	}
}

package render

import (
	"math"

	"gonum.org/v1/gonum/blas"
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

// refined returns the map to a block's internal steps from the window of base samples that they are made from. The window
// begins reach−1 samples before the block's first instant at the base rate.
func (g grid) refined() blas64.General {
	m := blas64.General{Rows: g.steps, Cols: g.window(), Stride: g.window(), Data: make([]float64, g.steps*g.window())}
	scale := 1 << g.plan.Doublings
	middle := g.reach * scale
	for j := range g.steps {
		// Step j lies (j+1)/scale base samples behind the block's start, which is the window's sample reach−1.
		at := (g.reach-1)*scale + j + 1
		for b := range m.Cols {
			if k := middle + at - b*scale; k >= 0 && k < len(g.kernel) {
				m.Data[j*m.Stride+b] = g.kernel[k]
			}
		}
	}
	return m
}

// fold returns m, whose columns are a block's internal steps, for the base samples that make them.
func (g grid) fold(m blas64.General) blas64.General {
	out := blas64.General{Rows: m.Rows, Cols: g.window(), Stride: g.window(), Data: make([]float64, m.Rows*g.window())}
	blas64.Gemm(blas.NoTrans, blas.NoTrans, 1, m, g.refined(), 0, out)
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

// ripple returns by how much steps are off the means of each base sample's at most.
func (g grid) ripple(steps, means []float64) float64 {
	scale := 1 << g.plan.Doublings
	most := 0.
	for i, v := range steps {
		most = max(most, math.Abs(v-means[i/scale]))
	}
	return most
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

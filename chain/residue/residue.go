// Package residue measures the layers of a run and says what there is to say of them.
//
// Levels are in dBFS of the converter: a sine that fills its span has 0; the RMS excludes DC; silence is −Inf.
package residue

import (
	"math"

	"midrail/chain/render"
	"midrail/signals/level"
)

// Meters listen to a run's layers.
type Meters struct {
	layers [render.LayerCount]*level.Meter
	folded *level.Meter
	heard  *level.Meter
}

// NewMeters returns meters for a converter's rate in Hz.
func NewMeters(rate float64) *Meters {
	m := &Meters{folded: level.NewMeter(rate), heard: level.NewMeter(rate)}
	for i := range m.layers {
		m.layers[i] = level.NewMeter(rate)
	}
	return m
}

// Write takes a block of a run.
func (m *Meters) Write(b *render.Block) {
	for i, l := range b.Layers {
		m.layers[i].Write(l)
	}
	m.folded.Write(b.Folded)
	m.heard.Write(b.Heard)
}

// Residue is what the meters found.
type Residue struct {
	Layers [render.LayerCount]level.Reading
	Folded level.Reading // that part of the interference that lies above half the converter's rate
	Heard  level.Reading
}

// Result returns what was found.
func (m *Meters) Result() *Residue {
	r := &Residue{Folded: m.folded.Result(), Heard: m.heard.Result()}
	for i, l := range m.layers {
		r.Layers[i] = l.Result()
	}
	return r
}

// BelowWanted returns by how many dB a layer lies below the wanted one; NaN where either is silent.
func (r *Residue) BelowWanted(l render.Layer) float64 {
	wanted, layer := r.Layers[render.Wanted].RMS, r.Layers[l].RMS
	if math.IsInf(wanted, -1) || math.IsInf(layer, -1) {
		return math.NaN()
	}
	return wanted - layer
}

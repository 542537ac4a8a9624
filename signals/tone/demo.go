package tone

import (
	"math"
	"math/rand/v2"

	"midrail/signals"
)

// The demo track, in s.
const (
	demoRate    = 48000
	demoSeconds = 20
	tootAt      = 3.5  // the queen's first, long toot
	mowerAt     = 12.0 // when the mower is nearest
	mowerWidth  = 1.6
)

// Demo returns the demo track, 20 s of mono at 48 kHz: what a microphone hears in a beehive's brood box. The colony
// hums throughout; a queen pipes at 3.5 s; from 8 s to 16 s a mower passes outside and comes near full scale; crickets
// sing above 4 kHz.
func Demo() signals.Track {
	draw := rand.New(rand.NewPCG(1851, 20))
	h, q, m, c := &hum{draw: draw}, queen{}, &mower{draw: draw}, cricket{}
	return track(demoRate, demoSeconds, func(i int64) float64 {
		t := float64(i) / demoRate
		return h.at(t) + q.at(t) + m.at(t) + c.at(t)
	})
}

// hum is the colony: a hundred thousand wings near 230 Hz, which is a broad tone with harmonics, and rustle.
type hum struct {
	draw          *rand.Rand
	phase         float64
	drift, rustle float64 // slow noise; low-passed noise
}

func (h *hum) at(t float64) float64 {
	h.drift += 2e-4 * (h.draw.NormFloat64() - h.drift)
	h.rustle += 0.12 * (h.draw.NormFloat64() - h.rustle)
	h.phase += (228 + 600*h.drift) / demoRate
	_, h.phase = math.Modf(h.phase)
	swell := 0.8 + 0.2*turns(t/5.3)
	return swell * (0.034*turns(h.phase) + 0.018*turns(2*h.phase) + 0.008*turns(3*h.phase) + 0.004*turns(5*h.phase) + 0.006*h.rustle)
}

// queen pipes: one long toot and seven short ones, each rising at its beginning.
type queen struct{}

func (queen) at(t float64) float64 {
	since, long := t-tootAt, 1.1
	if since < 0 {
		return 0
	}
	if since > 1.4 {
		n := math.Floor((since - 1.4) / 0.36)
		if n > 6 {
			return 0
		}
		since, long = since-1.4-n*0.36, 0.24
	}
	if since > long {
		return 0
	}
	edge := math.Min(1, math.Min(since, long-since)/0.03)
	// 410 Hz, from a whole tone below in the first 50 ms.
	turn := 410*since - 0.109*410*0.05*(1-math.Exp(-since/0.05))
	return edge * edge * (0.11*turns(turn) + 0.05*turns(2*turn) + 0.03*turns(3*turn) + 0.012*turns(4*turn))
}

// mower is a four-stroke engine and its blades' wind.
type mower struct {
	draw *rand.Rand
	wind [2]float64
}

func (m *mower) at(t float64) float64 {
	for i := range m.wind {
		x := m.draw.NormFloat64()
		if i > 0 {
			x = m.wind[i-1]
		}
		m.wind[i] += [...]float64{0.35, 0.2}[i] * (x - m.wind[i])
	}
	d := (t - mowerAt) / mowerWidth
	near := math.Exp(-d * d / 2)
	if near < 1e-5 {
		return 0
	}
	turn := 26.5 * t // strokes a second
	engine := 0.0
	for k, a := range [...]float64{0.06, 0.16, 0.05, 0.13, 0.03, 0.08, 0.02, 0.05, 0.03, 0.02, 0.04} {
		engine += a * turns(float64(k+1)*turn+0.13*float64(k*k))
	}
	beat := 1 + 0.3*turns(2*turn)
	return near * (1.5*engine + 0.46*beat*m.wind[1])
}

// cricket sings in chirps of three or four pulses, two of them at their own pitch.
type cricket struct{}

func (cricket) at(t float64) float64 {
	return chirp(t, 4720, 2.3, 4, 0.031) + chirp(t+0.17, 6350, 1.7, 3, 0.018)
}

// chirp is one cricket: its pitch in Hz, chirps a second, pulses in each, and amplitude.
func chirp(t, pitch, chirps float64, pulses int, amplitude float64) float64 {
	_, within := math.Modf(t * chirps)
	since := within / chirps
	const pulse = 0.032
	n := int(since / pulse)
	if n >= pulses {
		return 0
	}
	x := (since - float64(n)*pulse) / (pulse * 0.7)
	if x > 1 {
		return 0
	}
	envelope := math.Sin(math.Pi * x)
	return amplitude * envelope * envelope * turns(pitch*t)
}

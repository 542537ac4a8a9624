package command

import (
	"context"
	"fmt"
	"io"
	"math"
	"slices"
	"strings"

	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/chain/corner"
	"midrail/chain/quantity"
	"midrail/chain/render"
	"midrail/chain/residue"
	"midrail/chain/rest"
	"midrail/chain/room"
	"midrail/cmd/report"
	"midrail/signals"
)

// wary is how far fold-back is to lie below the wanted sound where no limit says, in dB.
const wary = 40

// settlingChange is the part on which settling hangs most with a value about half as large, and the settling with it;
// nil where no part is known, or it helps nothing.
func settlingChange(n *circuit.Network, r *rest.Rest) (*report.Change, error) {
	if len(r.Slow) == 0 || r.Slow[0].Part.Name == "" || !(r.Settling.OnePercent > 0) {
		return nil, nil
	}
	part := r.Slow[0].Part
	value := part.Preferred().Nearest(part.Value / 2)
	with, ok := n.With(part.Name, value)
	if !ok {
		return nil, nil
	}
	at, err := with.Rest()
	if err != nil {
		return nil, nil // it rests no more: no change to tell of
	}
	settling, err := rest.Settle(with, at)
	if err != nil || !(settling.OnePercent < r.Settling.OnePercent) {
		return nil, nil
	}
	return &report.Change{
		About: report.AboutSettling, Set: setting(part, value), Words: words(part, value),
		Was: report.Of(r.Settling.OnePercent), Becomes: report.Of(settling.OnePercent), Unit: "s",
	}, nil
}

// setting returns what --set takes to give a part another value.
func setting(p chain.Part, value float64) string { return p.Name + "=" + preferredCode(p, value) }

// preferredCode returns a value of a part as the chain file writes it.
func preferredCode(p chain.Part, value float64) string {
	kind := quantity.Resistance
	if p.Unit == chain.Farad {
		kind = quantity.Capacitance
	}
	return quantity.FormatCode(kind, value)
}

// words tells of a change of a part.
func words(p chain.Part, value float64) string {
	name := p.Name
	if p.Ref != "" {
		name += " (" + p.Ref + ")"
	}
	return fmt.Sprintf("%s = %s in place of %s", name, preferredCode(p, value), preferredCode(p, p.Value))
}

// changesOf tells, for each number of the verdict that is not as it should be, the one change that helps most, and what it
// becomes. What depends on the chain alone is known.
func changesOf(ctx context.Context, n *circuit.Network, j job, r *render.Result, res *residue.Residue, k *known) ([]report.Change, error) {
	var list []report.Change
	if c := overloadChange(n, r); c != nil {
		list = append(list, *c)
	}
	fold, err := foldBackChange(ctx, n, j, res)
	if err != nil {
		return nil, err
	}
	if fold != nil {
		list = append(list, *fold)
	}
	if noise := res.Layers[render.Noise].RMS; k.best.Gain > 0 && !math.IsInf(noise, -1) {
		total := 10 * math.Log10(math.Pow(10, noise/10)+math.Pow(10, res.Layers[render.Rounding].RMS/10))
		list = append(list, report.Change{
			About: report.AboutNoise, Words: k.best.Words, Was: report.Of(total), Becomes: report.Of(total - k.best.Gain), Unit: "dBFS",
		})
	}
	if k.settling != nil {
		list = append(list, *k.settling)
	}
	if c := droopChange(n); c != nil {
		list = append(list, *c)
	}
	return list, nil
}

// overloadChange is the gain part of the amplifier with the least room, where there is none left, with the value that just
// fits.
func overloadChange(n *circuit.Network, r *render.Result) *report.Change {
	tightest, least := -1, 0.
	for k := range r.Amplifiers {
		if x := r.Amplifiers[k].Room(); !n.Amplifiers[k].Virtual && x < least {
			tightest, least = k, x
		}
	}
	if tightest < 0 {
		return nil
	}
	part, value, left, ok := room.Fit(n, r, tightest)
	if !ok {
		return nil
	}
	return &report.Change{
		About: report.AboutOverload, Set: setting(part, value), Words: words(part, value),
		Was: report.Of(least), Becomes: report.Of(left), Unit: "dB of room",
	}
}

// foldBackChange is the lowest common rate of the converter with which fold-back lies as far below the wanted sound as the
// chain's limit asks, else the one that helps most, predicted from the first seconds of the recording.
func foldBackChange(ctx context.Context, n *circuit.Network, j job, res *residue.Residue) (*report.Change, error) {
	const most = 20 // s of the recording
	c := n.Chain
	below := res.BelowWanted(render.FoldBack)
	wanted := float64(wary)
	if l := c.Limits.FoldBackBelowWanted; l != nil {
		wanted = *l
	}
	if math.IsNaN(below) || below >= wanted {
		return nil, nil
	}
	tracks, err := openTracks(c, j)
	if err != nil {
		return nil, err
	}
	defer tracks.close()
	feeds := make([]signals.Stream, len(tracks.feeds))
	for i, f := range tracks.feeds {
		if f.Sound != nil {
			feeds[i] = &beginning{f.Sound, int(most * f.Rate)}
		}
	}
	sound, err := corner.Listen(ctx, n, feeds, tracks.list[0].Rate())
	if err != nil {
		return nil, err
	}
	now := sound.BelowWith(n)
	best, becomes := 0., below
	for _, rate := range corner.Common() {
		if rate <= c.Converter.Rate {
			continue
		}
		with, faster := *n, *c
		faster.Converter.Rate = rate
		with.Chain = &faster
		if at := below + sound.BelowWith(&with) - now; at > becomes {
			best, becomes = rate, at
		}
		if becomes >= wanted {
			break
		}
	}
	if best == 0 {
		return nil, nil
	}
	told := func(rate float64) string { return quantity.Format(quantity.Frequency, rate) }
	change := &report.Change{
		About: report.AboutFoldBack, Set: fmt.Sprintf("converter.rate=%g", best),
		Words: fmt.Sprintf("converter.rate = %s in place of %s", told(best), told(c.Converter.Rate)),
		Was:   report.Of(below), Becomes: report.Of(becomes), Unit: "dB below wanted",
	}
	switch {
	case math.IsInf(becomes, 1):
		change.Words += ", above whose half the track holds nothing,"
	case becomes < wanted:
		change.Words += "; a filter of higher order besides: midrail corner finds one"
	}
	return change, nil
}

// beginning is the first samples of a stream.
type beginning struct {
	signals.Stream
	left int
}

func (b *beginning) Read(dst []float64) (int, error) {
	if len(dst) <= b.left {
		b.left -= len(dst)
		return b.Stream.Read(dst)
	}
	left := b.left
	b.left = 0
	n, err := b.Stream.Read(dst[:left])
	if err == nil {
		err = io.EOF
	}
	return n, err
}

// droopChange is, where the droop's limit is broken, the part whose next preferred value to either side takes off most of it.
func droopChange(n *circuit.Network) *report.Change {
	d := n.Chain.Limits.Droop
	if d == nil {
		return nil
	}
	was := residue.Droop(n, d.At)
	if was <= d.Max {
		return nil
	}
	var best *report.Change
	becomes := was
	for _, list := range [...][]circuit.Component{n.Resistors, n.Capacitors} {
		for _, c := range list {
			if c.Virtual || !slices.ContainsFunc(n.Chain.Stages, func(s chain.Stage) bool { return strings.HasPrefix(c.Part.Name, s.Name+".") }) {
				continue
			}
			series := c.Part.Preferred()
			for _, value := range [...]float64{series.Down(c.Part.Value), series.Up(c.Part.Value)} {
				with, ok := n.With(c.Part.Name, value)
				if !ok {
					continue
				}
				if x := residue.Droop(with, d.At); x < becomes {
					becomes = x
					best = &report.Change{
						About: report.AboutDroop, Set: setting(c.Part, value), Words: words(c.Part, value),
						Was: report.Of(was), Becomes: report.Of(x), Unit: "dB",
					}
				}
			}
		}
	}
	return best
}

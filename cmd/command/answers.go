package command

import (
	"bytes"
	"io"
	"strings"

	"midrail/chain/circuit"
	"midrail/chain/noise"
	"midrail/chain/response"
	"midrail/chain/rest"
	"midrail/chain/ripple"
	"midrail/cmd/report"
)

// answersOf is what response, rest, noise and ripple print of a chain, for the report: response once for each input.
func answersOf(n *circuit.Network, settled *rest.Rest, b *noise.Budget, best noise.Change) ([]report.Answer, error) {
	at, err := n.Rest()
	if err != nil {
		return nil, err
	}
	var all []report.Answer
	add := func(title string, print func(io.Writer) error) error {
		var text bytes.Buffer
		if err := print(&text); err != nil {
			return err
		}
		all = append(all, report.Answer{Title: title, Lines: strings.Split(strings.TrimRight(text.String(), "\n"), "\n")})
		return nil
	}
	for _, in := range n.Chain.Inputs {
		path, err := response.NewPath(n, in.Name, "")
		if err != nil {
			return nil, err
		}
		r, err := responseOf(n, path, responseGrid(n))
		if err != nil {
			return nil, err
		}
		if err := add("Response from "+in.Name, func(w io.Writer) error { return r.print(w, false) }); err != nil {
			return nil, err
		}
	}
	if err := add("Rest and power-up", func(w io.Writer) error { return printRest(w, n, settled) }); err != nil {
		return nil, err
	}
	if err := add("Noise", noiseJSON(n, b, best).print); err != nil {
		return nil, err
	}
	frequencies, err := parseFrequencies(rippleFrequencies)
	if err != nil {
		return nil, err
	}
	err = add("Supply ripple", func(w io.Writer) error { return printRipple(w, ripple.Find(n, at, frequencies)) })
	return all, err
}

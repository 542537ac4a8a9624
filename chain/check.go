package chain

import (
	"fmt"
	"slices"
	"strings"
	"unicode"
	"unicode/utf8"
)

// What names are of.
const (
	anInput     = "input"
	aStage      = "stage"
	aBias       = "bias"
	anAmplifier = "amplifier"
)

// longestName is the length of the longest name in runes.
const longestName = 200

// given is a name that the file gives to something.
type given struct {
	name, thing string
	at          place
}

// reference is a use of a name.
type reference struct {
	at     place
	who    string // as faults tell it
	key    string
	name   string
	words  []string // what it may be that is no name
	things []string // what the name may be of
}

// give notes a name, and tells of one that cannot be.
func (r *reader) give(name, thing string, at place) {
	switch {
	case name == "":
		r.fault(at, "the name is empty", "give it one")
	case utf8.RuneCountInString(name) > longestName:
		r.fault(at, fmt.Sprintf("the name %q is longer than %d characters", short(name), longestName), "shorten it")
	case strings.ContainsAny(name, ".=") || strings.ContainsFunc(name, unicode.IsControl):
		r.fault(at, fmt.Sprintf("the name %q has a point, an equals sign or a control character in it", short(name)), "take it out")
	case strings.TrimSpace(name) != name:
		r.fault(at, fmt.Sprintf("the name %q begins or ends with a space", short(name)), "take it out")
	case slices.Contains([]string{"supply", "ground", "mix", "conditions", "converter", "limits"}, name):
		r.fault(at, fmt.Sprintf("the name %q means something already", name), "choose another")
	}
	for _, other := range r.names {
		if other.name == name {
			r.fault(at, fmt.Sprintf("the name %q is that of %s already", short(name), article(other.thing)), "choose another: inputs, stages, biases and amplifiers share one set of names")
			r.unsure, r.twice = true, true
			return
		}
	}
	r.names = append(r.names, given{name, thing, at})
}

func article(thing string) string {
	if strings.ContainsRune("aeiou", rune(thing[0])) {
		return "an " + thing
	}
	return "a " + thing
}

// refer reads a name of one of the things, or one of the words. It returns "" where there is none.
func (t *table) refer(key string, need Need, words []string, things ...string) string {
	e := t.find(key, need)
	if e == nil {
		t.unsure = t.unsure || need == Must
		return ""
	}
	if e.shape != textShape {
		t.wrong(e, fmt.Sprintf("%s must be a name, not %s", key, e.shape), "put it in quotes")
		t.unsure = true
		return ""
	}
	t.references = append(t.references, reference{at: e.node.at, who: t.name, key: key, name: e.text, words: words, things: things})
	return e.text
}

// checkNames tells of names that are used and not given, given and not used, and of stages that drive themselves.
func (r *reader) checkNames(c *Chain) {
	for _, ref := range r.references {
		r.resolve(ref)
	}
	if !r.twice {
		r.cycles(c)
	}
	if r.unsure {
		return
	}
	heard := c.heard()
	for _, g := range r.names {
		used := slices.ContainsFunc(r.references, func(ref reference) bool { return ref.name == g.name })
		switch {
		case g.thing == anInput && !heard[g.name]:
			r.fault(g.at, fmt.Sprintf("input %q does not lead to the converter", short(g.name)), "take it out, or let a stage come from it")
		case g.thing == aStage && !heard[g.name]:
			r.fault(g.at, fmt.Sprintf("stage %q does not lead to the converter", short(g.name)), "take it out, or let another stage or the converter come from it")
		case (g.thing == aBias || g.thing == anAmplifier) && !used:
			r.fault(g.at, fmt.Sprintf("nothing uses %s %q", g.thing, short(g.name)), "take it out")
		}
	}
}

// resolve tells of a reference to something that is not there.
func (r *reader) resolve(ref reference) {
	if slices.Contains(ref.words, ref.name) {
		return
	}
	could := slices.Clone(ref.words)
	what := ""
	for _, g := range r.names {
		if slices.Contains(ref.things, g.thing) {
			could = append(could, short(g.name))
		}
		if g.name == ref.name {
			what = g.thing
		}
	}
	if slices.Contains(ref.things, what) {
		return
	}
	r.unsure = true
	if r.unnamed && what == "" && slices.Contains(ref.things, aStage) {
		return
	}
	wanted := strings.Join(ref.things, " or ")
	otherwise := "there is none yet; add one"
	if len(could) > 0 {
		otherwise = "choose one of " + strings.Join(could[:min(len(could), 10)], ", ")
	}
	if what != "" {
		r.fault(ref.at, fmt.Sprintf("%s: %s must be %s, and %q is %s", ref.who, ref.key, article(wanted), short(ref.name), article(what)), otherwise)
		return
	}
	if len(r.faults) < mostFaults { // looking for near names takes its time
		otherwise = suggest(ref.name, could, otherwise)
	}
	r.fault(ref.at, fmt.Sprintf("%s: there is no %s %q", ref.who, wanted, short(ref.name)), otherwise)
}

// heard returns the inputs and stages that lead to the converter, the sources that a select does not pick included.
func (c *Chain) heard() map[string]bool {
	heard := map[string]bool{}
	var visit func(name string)
	visit = func(name string) {
		if heard[name] {
			return
		}
		heard[name] = true
		if s := c.StageNamed(name); s != nil {
			for _, from := range s.From {
				visit(from)
			}
		}
	}
	visit(c.Converter.From)
	visit(c.Converter.SharesWith)
	return heard
}

// cycles tells of stages that drive themselves. Where there are none, every stage leads back to an input.
func (r *reader) cycles(c *Chain) {
	var path []string
	done := map[string]bool{}
	var visit func(name string)
	visit = func(name string) {
		s := c.StageNamed(name)
		if s == nil || done[name] {
			return
		}
		if i := slices.Index(path, name); i >= 0 {
			r.unsure = true
			if len(r.faults) < mostFaults { // a circle's text may be long
				round := append(slices.Clone(path[i:]), name)
				r.fault(place{pos: s.Pos}, "stages go round in a circle: "+strings.Join(round, " → "), "let each come from an input or from a stage nearer to one")
			}
			return
		}
		path = append(path, name)
		for _, from := range s.From {
			visit(from)
		}
		path = path[:len(path)-1]
		done[name] = true
	}
	for i := range c.Stages {
		visit(c.Stages[i].Name)
	}
}

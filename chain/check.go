package chain

import (
	"fmt"
	"strings"
)

// StageNamed returns the stage of that name, or nil.
func (c *Chain) StageNamed(name string) *Stage {
	for i := range c.Stages {
		if c.Stages[i].Name == name {
			return &c.Stages[i]
		}
	}
	return nil
}

// InputNamed returns the input of that name, or nil.
func (c *Chain) InputNamed(name string) *Input {
	for i := range c.Inputs {
		if c.Inputs[i].Name == name {
			return &c.Inputs[i]
		}
	}
	return nil
}

// BiasNamed returns the bias of that name, or nil.
func (c *Chain) BiasNamed(name string) *Bias {
	for i := range c.Biases {
		if c.Biases[i].Name == name {
			return &c.Biases[i]
		}
	}
	return nil
}

// AmplifierNamed returns the amplifier of that name, or nil.
func (c *Chain) AmplifierNamed(name string) *Amplifier {
	for i := range c.Amplifiers {
		if c.Amplifiers[i].Name == name {
			return &c.Amplifiers[i]
		}
	}
	return nil
}

// crossCheck tells of names that do not go together.
func (r *reader) crossCheck(c *Chain) {
	r.uniqueNames(c)
	used := map[string]bool{}
	var sound, biases, amplifiers []string
	for i := range c.Inputs {
		sound = append(sound, c.Inputs[i].Name)
	}
	for i := range c.Stages {
		sound = append(sound, c.Stages[i].Name)
	}
	for i := range c.Biases {
		biases = append(biases, c.Biases[i].Name)
	}
	for i := range c.Amplifiers {
		amplifiers = append(amplifiers, c.Amplifiers[i].Name)
	}
	refer := func(pos Pos, who, what, name string, list []string) {
		used[name] = true
		if name != "" && !contains(list, name) {
			r.fault(pos, "", fmt.Sprintf("%s: there is no %s %q", who, what, short(name)), suggest(name, list, "the names are "+strings.Join(list, ", ")))
		}
	}
	for i := range c.Biases {
		b := &c.Biases[i]
		refer(b.Pos, fmt.Sprintf("bias %q", b.Name), "amplifier", b.Buffer, amplifiers)
	}
	for i := range c.Stages {
		s := &c.Stages[i]
		who := fmt.Sprintf("stage %q", s.Name)
		for _, f := range s.From {
			refer(s.Pos, who, "input or stage", f, sound)
		}
		refer(s.Pos, who, "amplifier", s.Amplifier, amplifiers)
		refer(s.Pos, who, "bias", s.Bias, biases)
	}
	refer(c.Converter.Pos, "[converter]", "input or stage", c.Converter.From, sound)
	if c.Converter.SharesWith != "ground" {
		refer(c.Converter.Pos, "[converter]", "input or stage to share with", c.Converter.SharesWith, sound)
	}
	for i := range c.Interferers {
		x := &c.Interferers[i]
		if x.Into != "supply" {
			var inputs []string
			for k := range c.Inputs {
				inputs = append(inputs, c.Inputs[k].Name)
			}
			refer(x.Pos, "[[interferer]]", "input", x.Into, append(inputs, "supply"))
		}
	}
	r.unused(c, used)
	if len(r.faults) == 0 {
		r.cycles(c)
	}
}

func (r *reader) uniqueNames(c *Chain) {
	seen := map[string]string{}
	add := func(name, what string, pos Pos) {
		if before, there := seen[name]; there {
			r.fault(pos, "", fmt.Sprintf("the name %q is that of %s already", name, before), "names are unique over inputs, stages, biases and amplifiers; choose another")
		}
		seen[name] = what
	}
	for i := range c.Biases {
		add(c.Biases[i].Name, "a bias", c.Biases[i].Pos)
	}
	for i := range c.Amplifiers {
		add(c.Amplifiers[i].Name, "an amplifier", c.Amplifiers[i].Pos)
	}
	for i := range c.Inputs {
		add(c.Inputs[i].Name, "an input", c.Inputs[i].Pos)
	}
	for i := range c.Stages {
		add(c.Stages[i].Name, "a stage", c.Stages[i].Pos)
	}
}

func (r *reader) unused(c *Chain, used map[string]bool) {
	tell := func(name, what, remedy string, pos Pos) {
		if !used[name] {
			r.fault(pos, "", fmt.Sprintf("nothing uses %s %q", what, name), remedy)
		}
	}
	for i := range c.Biases {
		tell(c.Biases[i].Name, "bias", "take it out, or give it to a stage", c.Biases[i].Pos)
	}
	for i := range c.Amplifiers {
		tell(c.Amplifiers[i].Name, "amplifier", "take it out, or give it to a stage", c.Amplifiers[i].Pos)
	}
	for i := range c.Inputs {
		tell(c.Inputs[i].Name, "input", "take it out, or let a stage come from it", c.Inputs[i].Pos)
	}
	for i := range c.Stages {
		tell(c.Stages[i].Name, "stage", "take it out, or let a stage or the converter come from it", c.Stages[i].Pos)
	}
}

// cycles tells of stages that drive themselves. Where there is none, every stage leads back to an input.
func (r *reader) cycles(c *Chain) {
	const (
		open = 1
		shut = 2
	)
	state := map[string]int{}
	var path []string
	var visit func(name string) bool
	visit = func(name string) bool {
		s := c.StageNamed(name)
		if s == nil || state[name] == shut {
			return false
		}
		if state[name] == open {
			for path[0] != name {
				path = path[1:]
			}
			r.fault(s.Pos, "", fmt.Sprintf("stages go round in a circle: %s", strings.Join(append(path, name), " → ")), "a stage comes from an input or an earlier stage")
			return true
		}
		state[name] = open
		path = append(path, name)
		for _, from := range s.From {
			if visit(from) {
				return true
			}
		}
		path = path[:len(path)-1]
		state[name] = shut
		return false
	}
	for i := range c.Stages {
		path = path[:0]
		if visit(c.Stages[i].Name) {
			return
		}
	}
}

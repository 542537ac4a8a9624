package chain

import (
	"errors"
	"fmt"
	"strings"
	"unicode/utf8"

	"github.com/pelletier/go-toml/v2"
	"github.com/pelletier/go-toml/v2/unstable"
)

// shape tells what a node of the file's tree is.
type shape uint8

const (
	textShape shape = iota
	numberShape
	otherShape // boolean, date, time
	listShape
	tableShape
)

func (s shape) String() string {
	return [...]string{"a text", "a number", "neither text nor number", "a list", "a table"}[s]
}

// node is a value of the chain file with its place in it.
type node struct {
	shape   shape
	text    string // of a text, or as written
	pos     Pos
	origin  string // what it came from instead of the file: a --set
	items   []*node
	entries []*entry
}

// entry is a key of a table.
type entry struct {
	key string
	pos Pos
	*node
}

// get returns a table's entry, or nil.
func (n *node) get(key string) *entry {
	for _, e := range n.entries {
		if e.key == key {
			return e
		}
	}
	return nil
}

// put sets a table's entry.
func (n *node) put(key string, pos Pos, value *node) {
	if e := n.get(key); e != nil {
		e.node = value
		return
	}
	n.entries = append(n.entries, &entry{key: key, pos: pos, node: value})
}

// parse reads TOML into a tree. The library's decoder says whether it is TOML; its parser gives the places.
func parse(file string, data []byte) (*node, Faults) {
	if !utf8.Valid(data) {
		return nil, Faults{{File: file, Text: "this is not text in UTF-8", Remedy: "a chain file is a text file; see midrail new"}}
	}
	if fault, deep := tooDeep(file, data); deep {
		return nil, Faults{fault}
	}
	var any map[string]any
	if err := toml.Unmarshal(data, &any); err != nil {
		fault := Fault{File: file, Text: strings.TrimPrefix(err.Error(), "toml: "), Remedy: "chain files are TOML; see midrail new for one"}
		var decode *toml.DecodeError
		if errors.As(err, &decode) {
			line, column := decode.Position()
			fault.Pos = Pos{line, column}
		}
		return nil, Faults{fault}
	}
	var p unstable.Parser
	p.Reset(data)
	b := &builder{p: &p, data: data, root: &node{shape: tableShape}}
	b.at = b.root
	for p.NextExpression() {
		b.add(p.Expression())
	}
	if err := p.Error(); err != nil {
		return nil, Faults{{File: file, Text: err.Error(), Remedy: "chain files are TOML; see midrail new for one"}}
	}
	return b.root, nil
}

// deepest is how many brackets may stand open at once on a line's way into a value.
const deepest = 32

// tooDeep tells of more nesting than any chain file has, before a recursive parser sees it.
func tooDeep(file string, data []byte) (Fault, bool) {
	open, line := 0, 1
	for _, b := range data {
		switch b {
		case '\n':
			line++
		case '[', '{':
			if open++; open > deepest {
				return Fault{File: file, Pos: Pos{line, 1}, Text: "brackets are nested too deep", Remedy: "no value of a chain file is"}, true
			}
		case ']', '}':
			open = max(open-1, 0)
		}
	}
	return Fault{}, false
}

// builder makes the tree of a parser's expressions.
type builder struct {
	p    *unstable.Parser
	data []byte
	root *node
	at   *node // table that keys go to
}

func (b *builder) add(e *unstable.Node) {
	switch e.Kind {
	case unstable.Table:
		b.at = b.open(b.root, e.Key(), false)
	case unstable.ArrayTable:
		b.at = b.open(b.root, e.Key(), true)
	case unstable.KeyValue:
		b.keyValue(b.at, e)
	}
}

// open goes down a header's keys, making tables on the way; append says that the last one is a list of tables to
// which one is added.
func (b *builder) open(from *node, keys unstable.Iterator, appending bool) *node {
	at := from
	for keys.Next() {
		k := keys.Node()
		name, pos := string(k.Data), b.posOf(k)
		e := at.get(name)
		if e == nil {
			child := &node{shape: tableShape, pos: pos}
			if appending && keys.IsLast() {
				child.shape = listShape
			}
			at.put(name, pos, child)
			e = at.get(name)
		}
		at = e.node
		if at.shape == listShape {
			if appending && keys.IsLast() {
				at.items = append(at.items, &node{shape: tableShape, pos: pos})
			}
			if len(at.items) > 0 {
				at = at.items[len(at.items)-1]
			}
		}
	}
	return at
}

func (b *builder) keyValue(at *node, e *unstable.Node) {
	keys := e.Key()
	for keys.Next() {
		k := keys.Node()
		name, pos := string(k.Data), b.posOf(k)
		if keys.IsLast() {
			at.put(name, pos, b.value(e.Value(), pos))
			return
		}
		next := at.get(name)
		if next == nil {
			at.put(name, pos, &node{shape: tableShape, pos: pos})
			next = at.get(name)
		}
		at = next.node
	}
}

// value makes the node of a value whose key is at pos, for those that the parser gives no place.
func (b *builder) value(v *unstable.Node, pos Pos) *node {
	n := &node{text: string(v.Data), pos: pos}
	if v.Raw.Length > 0 {
		n.pos = b.posOf(v)
	}
	switch v.Kind {
	case unstable.String:
		n.shape = textShape
	case unstable.Integer, unstable.Float:
		n.shape = numberShape
	case unstable.Array:
		n.shape = listShape
		for it := v.Children(); it.Next(); {
			if it.Node().Kind != unstable.Comment {
				n.items = append(n.items, b.value(it.Node(), n.pos))
			}
		}
	case unstable.InlineTable:
		n.shape = tableShape
		for it := v.Children(); it.Next(); {
			if it.Node().Kind == unstable.KeyValue {
				b.keyValue(n, it.Node())
			}
		}
	default:
		n.shape = otherShape
	}
	return n
}

// posOf returns a node's place, its column in runes.
func (b *builder) posOf(n *unstable.Node) Pos {
	offset := int(n.Raw.Offset)
	if n.Raw.Length == 0 && len(n.Data) > 0 {
		offset = int(b.p.Range(n.Data).Offset)
	}
	before := string(b.data[:min(offset, len(b.data))])
	line := strings.Count(before, "\n")
	return Pos{line + 1, utf8.RuneCountInString(before[strings.LastIndexByte(before, '\n')+1:]) + 1}
}

// set applies one "NAME.key=value" of the command line to the tree.
func (root *node) set(one string) *Fault {
	origin := fmt.Sprintf("--set %q", one)
	wrong := func(text, remedy string) *Fault { return &Fault{File: origin, Text: text, Remedy: remedy} }
	path, value, ok := strings.Cut(one, "=")
	steps := strings.Split(strings.TrimSpace(path), ".")
	if !ok || len(steps) < 2 {
		return wrong("this is no NAME.key=value", `write it as "mic amp.r_f=180k"`)
	}
	owners := root.owners()
	at, ok := owners[steps[0]]
	if !ok {
		return wrong(fmt.Sprintf("nothing is named %q", steps[0]), suggest(steps[0], keysOf(owners), "it takes an input, stage, bias, amplifier or table of the chain file"))
	}
	for _, s := range steps[1 : len(steps)-1] {
		next := at.leg(s)
		if next == nil {
			if e := at.get(s); e != nil && e.shape == tableShape {
				next = e.node
			}
		}
		if next == nil {
			return wrong(fmt.Sprintf("%q has no %q", steps[0], s), "name a leg by what it comes from")
		}
		at = next
	}
	v := &node{shape: textShape, text: strings.TrimSpace(value), origin: origin}
	key := steps[len(steps)-1]
	if e := at.get(key); e != nil && e.shape == tableShape && e.get("value") != nil {
		e.put("value", Pos{}, v)
		return nil
	}
	at.put(key, Pos{}, v)
	at.get(key).pos = Pos{}
	return nil
}

// owners returns the tables that a --set can name.
func (root *node) owners() map[string]*node {
	owners := map[string]*node{}
	for _, e := range root.entries {
		switch {
		case e.shape == tableShape && (e.key == "input" || e.key == "bias" || e.key == "amplifier"):
			for _, one := range e.entries {
				if one.shape == tableShape {
					owners[one.key] = one.node
				}
			}
		case e.shape == tableShape:
			owners[e.key] = e.node
		case e.shape == listShape && e.key == "stage":
			for _, one := range e.items {
				if name := one.get("name"); one.shape == tableShape && name != nil {
					owners[name.text] = one
				}
			}
		}
	}
	return owners
}

// leg returns the stage's input table that comes from the given name, or nil.
func (n *node) leg(from string) *node {
	e := n.get("input")
	if e == nil {
		return nil
	}
	for _, item := range e.items {
		if f := item.get("from"); item.shape == tableShape && f != nil && f.text == from {
			return item
		}
	}
	return nil
}

func keysOf[V any](m map[string]V) []string {
	var keys []string
	for k := range m {
		keys = append(keys, k)
	}
	return keys
}

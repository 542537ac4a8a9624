package chain

import (
	"bytes"
	"errors"
	"fmt"
	"maps"
	"slices"
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

// place is where a key or a value was written.
type place struct {
	pos Pos    // in the file; of something that a --set added, its table's
	set string // the --set it came from, as faults call it; "" for the file
}

// node is a value of the chain file.
type node struct {
	shape   shape
	text    string // of a text its contents, otherwise as written
	at      place
	items   []*node  // of a list
	entries []*entry // of a table, in the order of the file
}

// entry is a key of a table, with its value.
type entry struct {
	key   string
	keyAt place
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

// put sets a table's entry and returns it. An entry that is there keeps the place of its key.
func (n *node) put(key string, at place, value *node) *entry {
	if e := n.get(key); e != nil {
		e.node = value
		return e
	}
	e := &entry{key: key, keyAt: at, node: value}
	n.entries = append(n.entries, e)
	return e
}

// mostKeys bounds the work of a hostile file: looking for keys that are there twice takes the square of their number.
// A chain of a hundred stages has some two thousand.
const mostKeys = 20_000

const notTOML = `chain files are TOML, with texts and names that hold spaces in quotes; "midrail new" writes an example`

// parse reads TOML into a tree. The library's decoder says whether it is TOML at all; its parser gives the places.
func parse(file string, data []byte) (*node, *Fault) {
	data = bytes.TrimPrefix(data, []byte("\ufeff"))
	where := cursor{data: data}
	if i := notUTF8(data); i >= 0 {
		return nil, &Fault{File: file, Pos: where.to(i), Text: "this is not text in UTF-8", Remedy: `save it as UTF-8; "midrail new" writes an example`}
	}
	if bytes.Count(data, []byte("="))+bytes.Count(data, []byte("["))+bytes.Count(data, []byte(".")) > mostKeys {
		return nil, &Fault{File: file, Pos: Pos{1, 1}, Text: fmt.Sprintf("the file has more than %d keys (equals signs, brackets and points)", mostKeys), Remedy: "is this a chain file?"}
	}
	var decoded map[string]any
	if err := toml.Unmarshal(data, &decoded); err != nil {
		fault := &Fault{File: file, Pos: Pos{1, 1}, Text: strings.TrimPrefix(err.Error(), "toml: "), Remedy: notTOML}
		var decode *toml.DecodeError
		if errors.As(err, &decode) {
			fault.Pos = where.toByteColumn(decode.Position())
		}
		return nil, fault
	}
	b := &builder{where: where, root: &node{shape: tableShape, at: place{pos: Pos{1, 1}}}}
	b.table = b.root
	var p unstable.Parser
	p.Reset(data)
	for p.NextExpression() {
		b.add(p.Expression())
	}
	if err := p.Error(); err != nil {
		return nil, &Fault{File: file, Pos: Pos{1, 1}, Text: err.Error(), Remedy: notTOML}
	}
	return b.root, nil
}

// notUTF8 returns the offset of the first byte that is not UTF-8, or -1.
func notUTF8(data []byte) int {
	for i := 0; i < len(data); {
		r, size := utf8.DecodeRune(data[i:])
		if r == utf8.RuneError && size == 1 {
			return i
		}
		i += size
	}
	return -1
}

// cursor turns offsets into places, in one pass where they rise.
type cursor struct {
	data         []byte
	offset       int
	lines, runes int // before offset; runes in its line
}

func (c *cursor) to(offset int) Pos {
	if offset < c.offset {
		*c = cursor{data: c.data}
	}
	for c.offset < offset {
		r, size := utf8.DecodeRune(c.data[c.offset:])
		c.offset += size
		c.runes++
		if r == '\n' {
			c.lines, c.runes = c.lines+1, 0
		}
	}
	return Pos{c.lines + 1, c.runes + 1}
}

// toByteColumn returns the place of a line and a column in bytes, both from 1.
func (c *cursor) toByteColumn(line, column int) Pos {
	offset := 0
	for ; line > 1; line-- {
		offset += bytes.IndexByte(c.data[offset:], '\n') + 1
	}
	return c.to(offset + column - 1)
}

// builder makes the tree of a parser's expressions. It trusts that they are sound TOML.
type builder struct {
	where cursor
	root  *node
	table *node // of the last header
}

func (b *builder) add(e *unstable.Node) {
	switch e.Kind {
	case unstable.Table:
		b.table = b.open(e.Key(), false)
	case unstable.ArrayTable:
		b.table = b.open(e.Key(), true)
	case unstable.KeyValue:
		b.keyValue(b.table, e)
	}
}

func (b *builder) placeOf(n *unstable.Node) place {
	return place{pos: b.where.to(int(n.Raw.Offset))}
}

// open goes down a header's keys, making tables on the way; where list is true the last key is a list of tables, to
// which one is added.
func (b *builder) open(keys unstable.Iterator, list bool) *node {
	at := b.root
	for keys.Next() {
		last := list && keys.IsLast()
		key, where := string(keys.Node().Data), b.placeOf(keys.Node())
		e := at.get(key)
		if e == nil {
			child := &node{shape: tableShape, at: where}
			if last {
				child.shape = listShape
			}
			e = at.put(key, where, child)
		}
		at = e.node
		if last {
			at.items = append(at.items, &node{shape: tableShape, at: where})
		}
		if at.shape == listShape && len(at.items) > 0 {
			at = at.items[len(at.items)-1]
		}
	}
	return at
}

// keyValue puts a key, which may be dotted, and its value into a table.
func (b *builder) keyValue(table *node, e *unstable.Node) {
	keys := e.Key()
	for keys.Next() {
		key, where := string(keys.Node().Data), b.placeOf(keys.Node())
		if keys.IsLast() {
			table.put(key, where, b.value(e.Value(), where))
			return
		}
		next := table.get(key)
		if next == nil {
			next = table.put(key, where, &node{shape: tableShape, at: where})
		}
		table = next.node
	}
}

// value makes the node of a value; around is the place for a value that the parser gives none, which are lists.
func (b *builder) value(v *unstable.Node, around place) *node {
	n := &node{text: string(v.Data), at: around}
	if v.Raw.Length > 0 {
		n.at = b.placeOf(v)
	}
	switch v.Kind {
	case unstable.String:
		n.shape = textShape
	case unstable.Integer, unstable.Float:
		n.shape = numberShape
	case unstable.Array:
		n.shape = listShape
		for it := v.Children(); it.Next(); {
			n.items = append(n.items, b.value(it.Node(), n.at))
		}
	case unstable.InlineTable:
		n.shape = tableShape
		for it := v.Children(); it.Next(); {
			b.keyValue(n, it.Node())
		}
	default:
		n.shape = otherShape
	}
	return n
}

// set applies one "NAME.key=value" of the command line to the tree.
func (n *node) set(one string) *Fault {
	origin := fmt.Sprintf("--set %q", one)
	wrong := func(text, remedy string) *Fault { return &Fault{File: origin, Text: text, Remedy: remedy} }
	if !utf8.ValidString(one) {
		return wrong("this is not text in UTF-8", "write it in UTF-8")
	}
	path, value, ok := strings.Cut(one, "=")
	steps := strings.Split(path, ".")
	for i := range steps {
		steps[i] = strings.TrimSpace(steps[i])
	}
	if !ok || len(steps) < 2 || len(steps) > 4 || slices.Contains(steps, "") {
		return wrong("this is not NAME.key=value", `write it as "mic amp.r_f=180k"`)
	}
	owners := n.owners()
	table := owners[steps[0]]
	if table == nil {
		return wrong(fmt.Sprintf("nothing is named %q", short(steps[0])), suggest(steps[0], slices.Collect(maps.Keys(owners)), "name an input, a stage, a bias, an amplifier or a table of the chain file"))
	}
	for i, step := range steps[1 : len(steps)-1] {
		next := table.leg(step)
		if e := table.get(step); next == nil && e != nil && e.shape == tableShape {
			next = e.node
		}
		if next == nil {
			return wrong(fmt.Sprintf("%q has no table %q", strings.Join(steps[:i+1], "."), short(step)), "name a leg by what it comes from")
		}
		table = next
	}
	at := place{pos: table.at.pos, set: origin}
	v := &node{shape: textShape, text: strings.TrimSpace(value), at: at}
	key := steps[len(steps)-1]
	if e := table.get(key); e != nil && e.shape == tableShape && e.get("value") != nil {
		table, key = e.node, "value" // a part that is a table
	}
	table.put(key, at, v)
	return nil
}

// owners returns the tables that a --set can name.
func (n *node) owners() map[string]*node {
	owners := map[string]*node{}
	for _, e := range n.entries {
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
				if name := one.get("name"); name != nil {
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
		if f := item.get("from"); f != nil && f.text == from {
			return item
		}
	}
	return nil
}

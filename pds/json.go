// The JSON form of a table.

package pds

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"strconv"
)

const (
	formatName    = "pathtally-system"
	formatVersion = 1
	// maxNesting bounds how deep a file may nest; the form itself needs 5.
	maxNesting = 32
)

// A FormatError says what is wrong with the JSON form of a system, and where.
type FormatError struct {
	Line, Column int    // from 1; column in bytes
	Path         string // such as rules[3].effect.taken; "" for the whole file
	Text         string
}

func (e *FormatError) Error() string {
	if e.Path == "" {
		return fmt.Sprintf("%d:%d: %s", e.Line, e.Column, e.Text)
	}
	return fmt.Sprintf("%d:%d: %s: %s", e.Line, e.Column, e.Path, e.Text)
}

// value is a JSON value with its place.
type value struct {
	offset int // of its first byte, roughly: of the token's end if it is short
	scalar any // string, json.Number, bool or nil
	kind   byte
	keys   []string // '{': members in order
	items  []*value // '{' and '['
}

// Read reads the JSON form of a system. Errors are *FormatError, except those of
// the reader r. All of r must be one system.
func Read(r io.Reader) (*Table, error) {
	data, err := io.ReadAll(r)
	if err != nil {
		return nil, err
	}
	in := &reader{data: data}
	in.dec = json.NewDecoder(bytes.NewReader(data))
	in.dec.UseNumber()
	root, err := in.parse("", 0)
	if err != nil {
		return nil, err
	}
	if _, err := in.dec.Token(); err != io.EOF {
		return nil, in.errorAt(int(in.dec.InputOffset()), "", "text behind the system")
	}
	return in.system(root)
}

type reader struct {
	data []byte
	dec  *json.Decoder
	b    *Builder
}

func (in *reader) errorAt(offset int, path, format string, args ...any) error {
	offset = min(offset, len(in.data))
	before := in.data[:offset]
	line := 1 + bytes.Count(before, []byte{'\n'})
	column := offset - (bytes.LastIndexByte(before, '\n') + 1) + 1
	return &FormatError{Line: line, Column: column, Path: path, Text: fmt.Sprintf(format, args...)}
}

func join(path, member string) string {
	if path == "" {
		return member
	}
	return path + "." + member
}

// parse reads one value with json's tokens; it keeps the order of members and
// refuses one that comes twice, which json itself would let pass.
func (in *reader) parse(path string, depth int) (*value, error) {
	if depth > maxNesting {
		return nil, in.errorAt(int(in.dec.InputOffset()), path, "nested deeper than %d", maxNesting)
	}
	at := in.skip(int(in.dec.InputOffset()))
	token, err := in.dec.Token()
	if err != nil {
		return nil, in.syntax(err, path)
	}
	v := &value{offset: at, scalar: token}
	switch token := token.(type) {
	case json.Delim:
		v.kind = byte(token)
		v.scalar = nil
		seen := map[string]bool{}
		for i := 0; in.dec.More(); i++ {
			at := fmt.Sprintf("%s[%d]", path, i)
			if v.kind == '{' {
				keyAt := in.skip(int(in.dec.InputOffset()))
				key, err := in.dec.Token()
				if err != nil {
					return nil, in.syntax(err, path)
				}
				name := key.(string)
				at = join(path, name)
				if seen[name] {
					return nil, in.errorAt(keyAt, at, "comes twice")
				}
				seen[name] = true
				v.keys = append(v.keys, name)
			}
			item, err := in.parse(at, depth+1)
			if err != nil {
				return nil, err
			}
			v.items = append(v.items, item)
		}
		if _, err := in.dec.Token(); err != nil {
			return nil, in.syntax(err, path)
		}
	case string:
		v.kind = 's'
	case json.Number:
		v.kind = 'n'
	case bool:
		v.kind = 'b'
	}
	return v, nil
}

// skip moves an offset over what stands between two tokens.
func (in *reader) skip(offset int) int {
	for offset < len(in.data) && bytes.IndexByte([]byte(" \t\r\n,:"), in.data[offset]) >= 0 {
		offset++
	}
	return offset
}

func (in *reader) syntax(err error, path string) error {
	var s *json.SyntaxError
	if errors.As(err, &s) {
		return in.errorAt(int(s.Offset), path, "%s", s.Error())
	}
	if err == io.EOF || err == io.ErrUnexpectedEOF {
		return in.errorAt(len(in.data), path, "the text ends too early")
	}
	return in.errorAt(int(in.dec.InputOffset()), path, "%v", err)
}

var kindText = map[byte]string{'{': "an object", '[': "a list", 's': "a string", 'n': "a number", 'b': "true or false", 0: "null"}

func (in *reader) want(v *value, path string, kind byte) error {
	if v.kind != kind {
		return in.errorAt(v.offset, path, "is %s, must be %s", kindText[v.kind], kindText[kind])
	}
	return nil
}

// members calls f for each member of an object; f says whether it knows the name.
func (in *reader) members(v *value, path string, f func(name string, v *value, path string) (known bool, err error)) error {
	if err := in.want(v, path, '{'); err != nil {
		return err
	}
	for i, name := range v.keys {
		known, err := f(name, v.items[i], join(path, name))
		if err != nil {
			return err
		}
		if !known {
			return in.errorAt(v.items[i].offset, join(path, name), "unknown member")
		}
	}
	return nil
}

func (in *reader) str(v *value, path string) (string, error) {
	if err := in.want(v, path, 's'); err != nil {
		return "", err
	}
	return v.scalar.(string), nil
}

func (in *reader) number(v *value, path string) (int64, error) {
	if err := in.want(v, path, 'n'); err != nil {
		return 0, err
	}
	text := v.scalar.(json.Number).String()
	n, err := strconv.ParseInt(text, 10, 64)
	if errors.Is(err, strconv.ErrRange) {
		return 0, in.errorAt(v.offset, path, "%s does not fit into 64 bits", text)
	}
	if err != nil {
		return 0, in.errorAt(v.offset, path, "%s is not an integer", text)
	}
	return n, nil
}

// names reads a list of different, non-empty strings.
func (in *reader) names(v *value, path string) ([]string, error) {
	if err := in.want(v, path, '['); err != nil {
		return nil, err
	}
	seen := map[string]int{}
	var names []string
	for i, item := range v.items {
		at := fmt.Sprintf("%s[%d]", path, i)
		s, err := in.str(item, at)
		if err != nil {
			return nil, err
		}
		if s == "" {
			return nil, in.errorAt(item.offset, at, "is empty")
		}
		if j, ok := seen[s]; ok {
			return nil, in.errorAt(item.offset, at, "%q is %s[%d] already", s, path, j)
		}
		seen[s] = i
		names = append(names, s)
	}
	return names, nil
}

func (in *reader) system(root *value) (*Table, error) {
	var counts, states, symbols []string
	var starts, rules, parameters, events, predicates *value
	var format string
	var version int64
	err := in.members(root, "", func(name string, v *value, path string) (bool, error) {
		var err error
		switch name {
		case "format":
			format, err = in.str(v, path)
			if err == nil && format != formatName {
				err = in.errorAt(v.offset, path, "is %q, must be %q", format, formatName)
			}
		case "version":
			version, err = in.number(v, path)
			if err == nil && version != formatVersion {
				err = in.errorAt(v.offset, path, "is %d, must be %d", version, formatVersion)
			}
		case "counts":
			counts, err = in.names(v, path)
		case "states":
			states, err = in.names(v, path)
		case "symbols":
			symbols, err = in.names(v, path)
		case "starts":
			starts, err = v, in.want(v, path, '[')
		case "rules":
			rules, err = v, in.want(v, path, '[')
		case "parameters":
			parameters = v
		case "events":
			events = v
		case "predicates":
			predicates = v
		default:
			return false, nil
		}
		return true, err
	})
	if err != nil {
		return nil, err
	}
	if format == "" || version == 0 {
		return nil, in.errorAt(root.offset, "", "no format or no version: must be %q, %d", formatName, formatVersion)
	}
	in.b = NewBuilder(counts...)
	for _, s := range states {
		in.b.State(s)
	}
	for _, s := range symbols {
		in.b.Symbol(s)
	}
	in.b.t.data = &Data{}
	if parameters != nil {
		if in.b.t.data.Parameters, err = in.variables(parameters, "parameters"); err != nil {
			return nil, err
		}
	}
	if events != nil {
		if in.b.t.data.Events, err = in.events(events, "events"); err != nil {
			return nil, err
		}
	}
	if predicates != nil {
		if err = in.predicates(predicates, "predicates"); err != nil {
			return nil, err
		}
	}
	if starts != nil {
		for i, v := range starts.items {
			h, err := in.head(v, fmt.Sprintf("starts[%d]", i))
			if err != nil {
				return nil, err
			}
			in.b.t.starts = append(in.b.t.starts, h)
		}
	}
	if rules != nil {
		for i, v := range rules.items {
			if err := in.rule(v, fmt.Sprintf("rules[%d]", i)); err != nil {
				return nil, err
			}
		}
	}
	if d := in.b.t.data; len(d.Parameters)+len(d.Events)+len(d.Predicates)+len(in.b.t.guards) == 0 {
		in.b.t.data = nil
	}
	return in.b.Table(), nil
}

func (in *reader) declared(v *value, path, what string, index map[string]int) (int32, error) {
	s, err := in.str(v, path)
	if err != nil {
		return 0, err
	}
	id, ok := index[s]
	if !ok {
		return 0, in.errorAt(v.offset, path, "%s %q is not declared", what, s)
	}
	return int32(id), nil
}

func (in *reader) head(v *value, path string) (Head, error) {
	var h Head
	err := in.members(v, path, func(name string, v *value, path string) (bool, error) {
		var id int32
		var err error
		switch name {
		case "state":
			id, err = in.declared(v, path, "state", in.b.states)
			h.State = StateID(id)
		case "symbol":
			id, err = in.declared(v, path, "symbol", in.b.symbols)
			h.Symbol = SymbolID(id)
		default:
			return false, nil
		}
		return true, err
	})
	if err == nil && (h.State == 0 || h.Symbol == 0) {
		err = in.errorAt(v.offset, path, "needs a state and a symbol")
	}
	return h, err
}

func (in *reader) effect(v *value, path string) (EffectID, error) {
	vector := make([]int64, len(in.b.t.counts))
	err := in.members(v, path, func(name string, v *value, path string) (bool, error) {
		for i, c := range in.b.t.counts {
			if c == name {
				n, err := in.number(v, path)
				vector[i] = n
				return true, err
			}
		}
		return true, in.errorAt(v.offset, path, "count %q is not declared", name)
	})
	if err != nil {
		return 0, err
	}
	return in.b.Effect(vector), nil
}

func (in *reader) rule(v *value, path string) error {
	var from Head
	var r Rule
	kind := ""
	var event, cond *value
	given := map[string]bool{}
	err := in.members(v, path, func(name string, v *value, path string) (bool, error) {
		given[name] = true
		var err error
		var id int32
		switch name {
		case "from":
			from, err = in.head(v, path)
		case "kind":
			kind, err = in.str(v, path)
			if err == nil && kind != "stop" && kind != "pop" && kind != "step" && kind != "push" {
				err = in.errorAt(v.offset, path, "is %q, must be stop, pop, step or push", kind)
			}
		case "state":
			id, err = in.declared(v, path, "state", in.b.states)
			r.State = StateID(id)
		case "top":
			id, err = in.declared(v, path, "symbol", in.b.symbols)
			r.Top = SymbolID(id)
		case "below":
			id, err = in.declared(v, path, "symbol", in.b.symbols)
			r.Below = SymbolID(id)
		case "effect":
			r.Effect, err = in.effect(v, path)
		case "doubtEffect":
			r.DoubtEffect, err = in.effect(v, path)
		case "doubt":
			var s string
			if s, err = in.str(v, path); err == nil {
				if s == "" {
					return true, in.errorAt(v.offset, path, "is empty")
				}
				Doubts(s)(in.b, &r)
			}
		case "label":
			var s string
			if s, err = in.str(v, path); err == nil {
				if s == "" {
					return true, in.errorAt(v.offset, path, "is empty")
				}
				Labelled(s)(in.b, &r)
			}
		case "marks":
			var names []string
			names, err = in.names(v, path)
			for _, s := range names {
				m, ok := in.b.Mark(s)
				if !ok {
					return true, in.errorAt(v.offset, path, "%q is one mark more than 32", s)
				}
				r.Mark |= m
			}
		case "spawn":
			if err = in.want(v, path, '['); err == nil {
				for i, item := range v.items {
					h, err := in.head(item, fmt.Sprintf("%s[%d]", path, i))
					if err != nil {
						return true, err
					}
					r.Spawn = append(r.Spawn, h)
				}
			}
		case "event":
			event = v
		case "guard":
			cond = v
		default:
			return false, nil
		}
		return true, err
	})
	if err != nil {
		return err
	}
	need := map[string][]string{"stop": nil, "pop": {"state"}, "step": {"state", "top"}, "push": {"state", "top", "below"}}
	if !given["from"] || !given["kind"] {
		return in.errorAt(v.offset, path, `needs "from" and "kind"`)
	}
	for _, name := range need[kind] {
		if !given[name] {
			return in.errorAt(v.offset, path, "%s needs %q", kind, name)
		}
		delete(given, name)
	}
	for _, name := range []string{"state", "top", "below"} {
		if given[name] {
			return in.errorAt(v.offset, join(path, name), "%s has none", kind)
		}
	}
	if given["doubtEffect"] && !given["doubt"] {
		return in.errorAt(v.offset, join(path, "doubtEffect"), "without a doubt")
	}
	if r.Mark&MarkLoss != 0 && kind != "stop" {
		return in.errorAt(v.offset, join(path, "marks"), "%q belongs to a stop", LossMark)
	}
	for i, s := range kindNames {
		if s == kind {
			r.Kind = Kind(i)
		}
	}
	g, err := in.guard(event, cond, path)
	if err != nil {
		return err
	}
	in.b.Add(from, r)
	if g != nil {
		in.b.guard(from, g)
	}
	return nil
}

// The written form: the same members in a fixed order, one rule a line.
type (
	headJSON struct {
		State  string `json:"state"`
		Symbol string `json:"symbol"`
	}
	ruleJSON struct {
		From        headJSON        `json:"from"`
		Kind        string          `json:"kind"`
		State       string          `json:"state,omitempty"`
		Top         string          `json:"top,omitempty"`
		Below       string          `json:"below,omitempty"`
		Effect      json.RawMessage `json:"effect,omitempty"`
		Doubt       string          `json:"doubt,omitempty"`
		DoubtEffect json.RawMessage `json:"doubtEffect,omitempty"`
		Event       string          `json:"event,omitempty"`
		Guard       string          `json:"guard,omitempty"`
		Label       string          `json:"label,omitempty"`
		Marks       []string        `json:"marks,omitempty"`
		Spawn       []headJSON      `json:"spawn,omitempty"`
	}
)

// WriteJSON writes the JSON form of the table: rules grouped by head, one a
// line. [Read] gives the table back, with equal names, rules and order.
func (t *Table) WriteJSON(w io.Writer) error {
	var b bytes.Buffer
	encode := func(v any) []byte {
		var out bytes.Buffer
		enc := json.NewEncoder(&out)
		enc.SetEscapeHTML(false)
		if err := enc.Encode(v); err != nil {
			panic(fmt.Sprintf("pds: write: %v", err)) // strings and integers always encode
		}
		return bytes.TrimSpace(out.Bytes())
	}
	list := func(names []string) []byte {
		if len(names) == 0 {
			return []byte("[]")
		}
		return encode(names)
	}
	head := func(h Head) headJSON { return headJSON{t.StateName(h.State), t.SymbolName(h.Symbol)} }
	effect := func(e EffectID) json.RawMessage {
		var out bytes.Buffer
		for i, n := range t.vectors[e] {
			if n != 0 {
				if out.Len() > 0 {
					out.WriteString(", ")
				}
				fmt.Fprintf(&out, "%s: %d", encode(t.counts[i]), n)
			}
		}
		if out.Len() == 0 {
			return nil
		}
		return json.RawMessage("{" + out.String() + "}")
	}
	fmt.Fprintf(&b, "{\n  \"format\": %q, \"version\": %d,\n", formatName, formatVersion)
	fmt.Fprintf(&b, "  \"counts\": %s,\n  \"states\": %s,\n  \"symbols\": %s,\n", list(t.counts), list(t.states[1:]), list(t.symbols[1:]))
	if t.data != nil {
		fmt.Fprintf(&b, "  \"parameters\": %s,\n  \"events\": %s,\n  \"predicates\": %s,\n",
			encode(variablesJSON(t.data.Parameters)), encode(t.eventsJSON()), encode(t.predicatesJSON()))
	}
	b.WriteString("  \"starts\": [")
	for i, h := range t.starts {
		if i > 0 {
			b.WriteString(", ")
		}
		b.Write(encode(head(h)))
	}
	b.WriteString("],\n  \"rules\": [")
	sep := "\n    "
	for _, h := range t.heads {
		for i, r := range t.rules[h] {
			out := ruleJSON{From: head(h), Kind: r.Kind.String(), Effect: effect(r.Effect), Label: t.LabelText(r.Label), Marks: t.markNames(r.Mark)}
			if r.Kind != Stop {
				out.State = t.StateName(r.State)
			}
			if r.Kind == Step || r.Kind == Push {
				out.Top = t.SymbolName(r.Top)
			}
			if r.Kind == Push {
				out.Below = t.SymbolName(r.Below)
			}
			if r.Doubt != 0 {
				out.Doubt, out.DoubtEffect = nameOf(t.doubts, int(r.Doubt), "doubt"), effect(r.DoubtEffect)
			}
			if g := t.Guard(h, i); g != nil {
				if g.Event >= 0 {
					out.Event = t.data.Events[g.Event].Name
				}
				if g.Cond != nil {
					out.Guard = g.Cond.Src
				}
			}
			for _, s := range r.Spawn {
				out.Spawn = append(out.Spawn, head(s))
			}
			b.WriteString(sep)
			b.Write(encode(out))
			sep = ",\n    "
		}
	}
	b.WriteString("\n  ]\n}\n")
	_, err := w.Write(b.Bytes())
	return err
}

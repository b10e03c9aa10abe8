// Graphviz output.

package pds

import (
	"fmt"
	"io"
	"strings"
)

// WriteDOT writes the table as a Graphviz digraph: one node per head, full
// edges for steps and pushed tops, dashed edges from a push to what continues
// below (named by its symbol, since the state is not known there), dotted edges
// to spawned heads.
func (t *Table) WriteDOT(w io.Writer) error {
	var b strings.Builder
	b.WriteString("digraph system {\n  node [shape=box];\n")
	node := func(h Head) string { return fmt.Sprintf("%q", t.StateName(h.State)+" "+t.SymbolName(h.Symbol)) }
	edge := func(from, to, style string, r Rule) {
		text := t.effectText(r.Effect)
		if l := t.LabelText(r.Label); l != "" {
			text = strings.TrimPrefix(text+"\n"+l, "\n")
		}
		fmt.Fprintf(&b, "  %s -> %s [style=%s, label=%q];\n", from, to, style, text)
	}
	for _, h := range t.starts {
		fmt.Fprintf(&b, "  %s [penwidth=2];\n", node(h))
	}
	for _, h := range t.heads {
		for _, r := range t.rules[h] {
			switch r.Kind {
			case Stop:
				edge(node(h), `"stop"`, "solid", r)
			case Pop:
				edge(node(h), fmt.Sprintf("%q", t.StateName(r.State)), "solid", r)
			case Step:
				edge(node(h), node(Head{r.State, r.Top}), "solid", r)
			case Push:
				edge(node(h), node(Head{r.State, r.Top}), "solid", r)
				fmt.Fprintf(&b, "  %s -> %q [style=dashed];\n", node(h), t.SymbolName(r.Below))
			}
			for _, s := range r.Spawn {
				fmt.Fprintf(&b, "  %s -> %s [style=dotted];\n", node(h), node(s))
			}
		}
	}
	b.WriteString("}\n")
	_, err := io.WriteString(w, b.String())
	return err
}

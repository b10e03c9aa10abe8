package frontend

import "golang.org/x/tools/go/ssa"

// closureOf is the closure that v is, seen through conversions; nil if its
// making is not in sight.
func closureOf(v ssa.Value) *ssa.MakeClosure {
	for {
		switch x := v.(type) {
		case *ssa.MakeClosure:
			return x
		case *ssa.ChangeType:
			v = x.X
		case *ssa.MakeInterface:
			v = x.X
		case *ssa.ChangeInterface:
			v = x.X
		default:
			return nil
		}
	}
}

// carryOver adds to ns what the name e of the instance is called after val was
// copied to `to`. A closure has no names of its own: what it captures is named
// by the captured values, and so is what the closures among them capture.
func (m *Model) carryOver(ns *nset, e Expr, val ssa.Value, to Expr) {
	ns.add(m.x.rebase(e, m.x.name(val), to))
	if mc := closureOf(val); mc != nil {
		for k, b := range mc.Bindings {
			m.carryOver(ns, e, b, m.x.capt(to, k))
		}
	}
}

// reaches tells whether e is a name under val, or under what the closure val captures.
func (m *Model) reaches(e Expr, val ssa.Value) bool {
	if m.x.within(m.x.name(val), e) {
		return true
	}
	if mc := closureOf(val); mc != nil {
		for _, b := range mc.Bindings {
			if m.reaches(e, b) {
				return true
			}
		}
	}
	return false
}

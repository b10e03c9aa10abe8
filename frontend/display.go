package frontend

import (
	"go/ast"
	"go/token"
	"go/types"
	"slices"
	"sort"
	"strings"

	"golang.org/x/tools/go/ast/astutil"
	"golang.org/x/tools/go/ssa"

	"pathtally/frontend/load"
	"pathtally/pds"
	"pathtally/properties"
)

type posFunc = func(token.Pos) (string, int, int)

type lblKind uint8

const (
	lblNone lblKind = iota
	lblEvent
	lblBirth
	lblDeferredEvent
	lblTrue
	lblFalse
	lblCall
	lblCallback
	lblReturn
	lblDefer
	lblDeferredRuns
	lblPanic
	lblCallPanics
	lblGoexit
	lblSpawn
	lblLost
	lblTurn
	lblTurnLost
)

// label is a step as the path view shows it; its text is made when asked for.
type label struct {
	kind  lblKind
	instr ssa.Instruction
	fn    *ssa.Function // callee
	side  int8          // lblTurn, lblTurnLost: which successor of instr's block
}

func (m *Model) label(l label) pds.LabelID {
	if l.instr == nil {
		return 0
	}
	if id, ok := m.labelID[l]; ok {
		return id
	}
	id := pds.LabelID(len(m.labels))
	m.labels = append(m.labels, l)
	m.labelID[l] = id
	return id
}

func (m *Model) doubt(i ssa.Instruction, text string) pds.DoubtID {
	return m.doubtAbout(i, "alias", text)
}

func (m *Model) doubtAbout(i ssa.Instruction, kind, text string) pds.DoubtID {
	k := doubtKey{i, text}
	if id, ok := m.doubtID[k]; ok {
		return id
	}
	id := pds.DoubtID(len(m.doubts))
	what := "this value"
	if c, ok := i.(ssa.CallInstruction); ok {
		what = m.callText(c)
	}
	m.doubts = append(m.doubts, properties.Note{Kind: kind, Place: m.place(i.Pos(), i), Text: what + " " + text})
	m.doubtID[k] = id
	return id
}

// Doubt implements properties.Model.
func (m *Model) Doubt(d pds.DoubtID) properties.Note { return m.doubts[d] }

// noteSet collects assumptions without doubles.
type noteSet struct {
	list []properties.Note
	seen map[properties.Note]bool
}

func (m *Model) note(at ssa.Instruction, kind, text string) {
	n := properties.Note{Kind: kind, Place: m.place(at.Pos(), at), Text: text}
	if m.notes.seen == nil {
		m.notes.seen = map[properties.Note]bool{}
	}
	if !m.notes.seen[n] {
		m.notes.seen[n] = true
		m.notes.list = append(m.notes.list, n)
	}
}

// Assumptions implements properties.Model.
func (m *Model) Assumptions() []properties.Note {
	out := slices.Clone(m.notes.list)
	sort.SliceStable(out, func(i, j int) bool {
		a, b := out[i], out[j]
		if a.Place.File != b.Place.File {
			return a.Place.File < b.Place.File
		}
		if a.Place.Line != b.Place.Line {
			return a.Place.Line < b.Place.Line
		}
		if a.Place.Column != b.Place.Column {
			return a.Place.Column < b.Place.Column
		}
		if a.Kind != b.Kind {
			return a.Kind < b.Kind
		}
		return a.Text < b.Text
	})
	return out
}

// funcOf describes a function; a closure carries its enclosing function's name.
func (m *Model) funcOf(fn *ssa.Function) properties.Func {
	fi := m.info(fn)
	f := properties.Func{ID: fi.id}
	top := fn
	for top.Parent() != nil {
		top = top.Parent()
	}
	named := top
	if o := top.Origin(); o != nil {
		named = o
	}
	if p := m.sh.prog.PackageOfFunction(fn); p != nil {
		f.Package = p.Path
		f.Name = named.RelString(p.Types)
	} else {
		f.Name = named.Name()
	}
	if base, n, ok := strings.Cut(f.Name, "#"); ok && base == "init" && n != "" {
		f.Name = base // several functions init are told apart by their places
	}
	f.Place = m.at(fn.Pos())
	if s := fn.Syntax(); s != nil {
		f.Place = m.at(s.Pos())
		f.End = m.at(s.End() - 1)
	}
	return f
}

func (m *Model) at(p token.Pos) properties.Place {
	if !p.IsValid() {
		return properties.Place{}
	}
	file, line, col := m.sh.prog.Position(p)
	return properties.Place{File: file, Line: line, Column: col}
}

// place is the position of an instruction, or of the nearest one that has a
// position: before it in its block, else after it, else the function's.
func (m *Model) place(p token.Pos, i ssa.Instruction) properties.Place {
	if p.IsValid() {
		return m.at(p)
	}
	if i == nil || i.Block() == nil {
		return properties.Place{}
	}
	instrs := i.Block().Instrs
	k := slices.Index(instrs, i)
	for j := k - 1; j >= 0; j-- {
		if q := bodyPos(instrs[j]); q.IsValid() {
			return m.at(q)
		}
	}
	for j := k + 1; j < len(instrs); j++ {
		if q := bodyPos(instrs[j]); q.IsValid() {
			return m.at(q)
		}
	}
	return m.at(i.Parent().Pos())
}

// bodyPos is the position of an instruction, unless it is where a variable was declared.
func bodyPos(i ssa.Instruction) token.Pos {
	switch i := i.(type) {
	case *ssa.Phi, *ssa.Alloc, *ssa.DebugRef, *ssa.MakeInterface:
		return token.NoPos
	case *ssa.Store:
		return i.Pos()
	}
	return i.Pos()
}

// Frame implements properties.Model.
func (m *Model) Frame(h pds.Head) properties.Frame {
	s := m.symbols[h.Symbol]
	return properties.Frame{
		Func:     m.funcOf(m.fns[s.fn].fn),
		Entry:    s.kind == symEntry,
		Deferred: s.kind == symDeferred,
	}
}

// Step implements properties.Model.
func (m *Model) Step(id pds.LabelID) properties.Step {
	l := m.labels[id]
	if l.instr == nil {
		return properties.Step{}
	}
	fn := l.instr.Parent()
	st := properties.Step{Func: m.funcOf(fn), Place: m.place(l.instr.Pos(), l.instr)}
	if c, ok := l.instr.(ssa.CallInstruction); ok {
		if p := m.callPos(c); p.IsValid() {
			st.Place = m.at(p)
		}
	}
	switch l.kind {
	case lblEvent:
		st.Kind, st.Text = properties.StepEvent, m.callText(l.instr.(ssa.CallInstruction))
	case lblBirth:
		st.Kind, st.Text = properties.StepCall, m.lineText(l.instr)
	case lblDeferredEvent:
		st.Kind, st.Text = properties.StepEvent, "the deferred "+m.callText(l.instr.(ssa.CallInstruction))
	case lblTrue, lblFalse:
		st.Kind = properties.StepBranch
		m.branchStep(&st, l.instr.(*ssa.If), l.kind == lblTrue)
	case lblCall:
		st.Kind, st.Text = properties.StepCall, m.callText(l.instr.(ssa.CallInstruction))
		if rs := m.rangeAt(l.instr.(ssa.CallInstruction)); rs != nil {
			st.Place, st.Text = m.at(rs.Pos()), "range "+m.nodeText(rs.X)
		}
	case lblCallback:
		st.Kind, st.Text = properties.StepCall, m.calleeText(l.instr.(ssa.CallInstruction))+" calls the function it is given"
		if rs := m.rangeAt(l.instr.(ssa.CallInstruction)); rs != nil {
			st.Place, st.Text = m.at(rs.Pos()), "the loop takes the next element"
		}
	case lblReturn:
		st.Kind, st.Text = properties.StepReturn, m.returnText(l.instr)
		if !l.instr.Pos().IsValid() && fn.Syntax() != nil {
			st.Place = m.at(fn.Syntax().End() - 1)
		}
	case lblDefer:
		st.Kind, st.Text = properties.StepDefer, "defer "+m.callText(l.instr.(ssa.CallInstruction))
	case lblDeferredRuns:
		st.Kind, st.Text = properties.StepCall, "the deferred call runs"
	case lblPanic:
		st.Kind, st.Text = properties.StepPanic, m.lineText(l.instr)
	case lblCallPanics:
		st.Kind, st.Text = properties.StepPanic, m.calleeText(l.instr.(ssa.CallInstruction))+" panics"
	case lblGoexit:
		st.Kind, st.Text = properties.StepEnd, m.calleeText(l.instr.(ssa.CallInstruction))+" ends the goroutine"
	case lblSpawn:
		st.Kind, st.Text = properties.StepSpawn, "go "+m.callText(l.instr.(ssa.CallInstruction))
	case lblTurn, lblTurnLost:
		m.turnStep(&st, l)
	case lblLost:
		st.Kind, st.Text = properties.StepEnd, "nothing refers to it any more"
	}
	if st.Text == "" {
		st.Text = strings.TrimSpace(m.sh.prog.SourceLine(m.posOf(l.instr)))
	}
	if st.Text == "" {
		st.Text = "in " + st.Func.Name
	}
	return st
}

func (m *Model) posOf(i ssa.Instruction) token.Pos {
	if p := i.Pos(); p.IsValid() {
		return p
	}
	return i.Parent().Pos()
}

func (m *Model) callPos(c ssa.CallInstruction) token.Pos {
	if e := m.callExpr(c); e != nil {
		return e.Pos()
	}
	return token.NoPos
}

// callExpr finds the call in the syntax.
func (m *Model) callExpr(c ssa.CallInstruction) ast.Node {
	pos := c.Common().Pos()
	if !pos.IsValid() {
		return nil
	}
	for _, n := range m.enclosing(pos) {
		switch n := n.(type) {
		case *ast.CallExpr:
			if n.Lparen == pos || n.Pos() == pos {
				return n
			}
		case *ast.RangeStmt:
			return nil
		}
	}
	return nil
}

// enclosing lists the syntax nodes around a position, innermost first.
func (m *Model) enclosing(pos token.Pos) []ast.Node {
	f := m.fileOf(pos)
	if f == nil {
		return nil
	}
	path, _ := astutil.PathEnclosingInterval(f, pos, pos+1)
	return path
}

func (m *Model) fileOf(pos token.Pos) *ast.File {
	name := m.sh.prog.FileOf(pos)
	return m.sh.syntaxOf(name)
}

// syntaxOf finds the syntax of a file by name; the index is made at the first question.
func (sh *Shared) syntaxOf(name string) *ast.File {
	sh.syntaxOnce.Do(func() {
		sh.syntax = map[string]*ast.File{}
		for _, p := range sh.prog.Packages {
			for _, f := range p.Syntax {
				sh.syntax[sh.prog.FileOf(f.Package)] = f
			}
		}
	})
	return sh.syntax[name]
}

func (m *Model) nodeText(n ast.Node) string { return m.sh.prog.SourceText(n.Pos(), n.End()) }

func (m *Model) callText(c ssa.CallInstruction) string {
	if e := m.callExpr(c); e != nil {
		if call, ok := e.(*ast.CallExpr); ok {
			if lit, ok := call.Fun.(*ast.FuncLit); ok {
				return "func" + m.sh.prog.SourceText(lit.Type.Params.Pos(), lit.Type.Params.End()) + " {…}()"
			}
			for _, a := range call.Args {
				if lit, ok := a.(*ast.FuncLit); ok {
					return load.Shorten(m.sh.prog.SourceText(call.Pos(), lit.Pos()) + "func…)")
				}
			}
		}
		return m.nodeText(e)
	}
	return m.calleeText(c) + "(…)"
}

// calleeText is the callee as the source writes it.
func (m *Model) calleeText(c ssa.CallInstruction) string {
	if e, ok := m.callExpr(c).(*ast.CallExpr); ok {
		if _, lit := e.Fun.(*ast.FuncLit); !lit {
			return m.nodeText(e.Fun)
		}
		return "the function literal"
	}
	com := c.Common()
	if com.IsInvoke() {
		return com.Method.Name()
	}
	if fn := com.StaticCallee(); fn != nil {
		return fn.Name()
	}
	return "the function value"
}

func (m *Model) lineText(i ssa.Instruction) string {
	for _, n := range m.enclosing(i.Pos()) {
		if s, ok := n.(ast.Stmt); ok {
			switch s.(type) {
			case *ast.BlockStmt, *ast.IfStmt, *ast.ForStmt, *ast.RangeStmt, *ast.SwitchStmt:
				return strings.TrimSuffix(strings.TrimSpace(m.sh.prog.SourceLine(i.Pos())), " {")
			}
			return m.nodeText(s)
		}
	}
	return strings.TrimSpace(m.sh.prog.SourceLine(i.Pos()))
}

func (m *Model) returnText(i ssa.Instruction) string {
	if !i.Pos().IsValid() {
		return "the function ends"
	}
	return m.lineText(i)
}

// branchStep puts a branch into words: the condition as the source writes it.
func (m *Model) branchStep(st *properties.Step, i *ssa.If, truth bool) {
	cond := i.Cond
	pos := token.NoPos
	if ci, ok := cond.(ssa.Instruction); ok && ci.Parent() == i.Parent() {
		pos = bodyPos(ci)
	}
	switch i.Block().Comment {
	case "rangefunc.resume.ready.check", "rangefunc.resume.exits", "rangefunc.resume.match":
		// How the body of a range over a function was left.
		st.Text = "the loop is left by a jump"
		if i.Block().Comment == "rangefunc.resume.ready.check" && truth {
			st.Text = "the loop ends"
		}
		for b := i.Block().Idom(); b != nil; b = b.Idom() {
			for k := len(b.Instrs) - 1; k >= 0; k-- {
				if c, ok := b.Instrs[k].(*ssa.Call); ok {
					if rs := m.rangeAt(c); rs != nil {
						st.Place = m.at(rs.Pos())
						return
					}
				}
			}
		}
		return
	case "rangeindex.loop", "rangeiter.loop", "rangechan.loop", "rangefunc.loop":
		if rs := m.loopOf(i); rs != nil {
			st.Place = m.at(rs.Pos())
			what := "element"
			if truth {
				st.Text = "the loop takes the next " + what
			} else {
				st.Text = "the loop ends"
			}
			return
		}
	}
	if i.Block().Succs[0].Comment == "rangeint.body" {
		if rs := m.loopOf(i); rs != nil {
			st.Place, st.Text = m.at(rs.Pos()), "the loop ends"
			if truth {
				st.Text = "the loop takes the next turn"
			}
			return
		}
	}
	if m.selectStep(st, cond, truth) {
		return
	}
	if !pos.IsValid() || !m.inCondition(pos) {
		if n, holds := m.ifAround(i, truth); n != nil {
			st.Place = m.at(n.Pos())
			st.Text = m.verdict(n, holds)
			return
		}
	}
	if !pos.IsValid() {
		st.Text = m.ssaCond(cond, truth)
		return
	}
	st.Place = m.at(pos)
	var best ast.Expr
	for _, n := range m.enclosing(pos) {
		e, ok := n.(ast.Expr)
		if !ok {
			if cc, ok := n.(*ast.CaseClause); ok {
				_ = cc
			}
			break
		}
		switch e := e.(type) {
		case *ast.BinaryExpr:
			if e.Op == token.LAND || e.Op == token.LOR {
				goto done
			}
			best = e
		case *ast.ParenExpr, *ast.CallExpr, *ast.SelectorExpr, *ast.Ident, *ast.IndexExpr, *ast.StarExpr, *ast.TypeAssertExpr:
			best = e
		case *ast.UnaryExpr:
			if e.Op == token.NOT {
				goto done
			}
			best = e
		case *ast.FuncLit:
			goto done
		default:
			best = e
		}
	}
done:
	if best == nil {
		st.Text = m.ssaCond(cond, truth)
		return
	}
	if b, ok := cond.(*ssa.BinOp); ok {
		if _, isBin := best.(*ast.BinaryExpr); !isBin {
			// A case of a switch: the comparison is not in the source.
			st.Text = m.ssaCond(b, truth)
			return
		}
	}
	st.Place = m.at(best.Pos())
	st.Text = m.verdict(best, truth)
}

// inCondition tells whether pos lies in the condition of a statement, or in an
// expression that branches itself, not in a statement before it.
func (m *Model) inCondition(pos token.Pos) bool {
	for _, n := range m.enclosing(pos) {
		switch n := n.(type) {
		case *ast.IfStmt:
			return pos >= n.Cond.Pos() && pos < n.Cond.End()
		case *ast.ForStmt:
			return n.Cond != nil && pos >= n.Cond.Pos() && pos < n.Cond.End()
		case *ast.CaseClause, *ast.SwitchStmt, *ast.TypeSwitchStmt:
			return true
		case *ast.BinaryExpr:
			if n.Op == token.LAND || n.Op == token.LOR {
				return true
			}
		case ast.Stmt:
			return false
		}
	}
	return false
}

func (m *Model) verdict(n ast.Node, truth bool) string {
	t := m.nodeText(n)
	if truth {
		return t + " is true"
	}
	return t + " is false"
}

// turnStep shows the end of a turn of a loop: its continue statement, or the
// closing brace of its body.
func (m *Model) turnStep(st *properties.Step, l label) {
	st.Kind, st.Text = properties.StepEnd, "the turn of the loop ends"
	if n := m.turnNode(l); n != nil {
		switch n := n.(type) {
		case *ast.BranchStmt:
			st.Place, st.Text = m.at(n.Pos()), m.nodeText(n)
		case *ast.BlockStmt:
			st.Place = m.at(n.Rbrace)
		}
	}
	if l.kind == lblTurnLost {
		st.Text += ", and nothing refers to it any more"
	}
}

// turnNode is the continue (or goto) statement that ends the turn, or the body
// of the loop whose end does; nil if the source does not tell.
func (m *Model) turnNode(l label) ast.Node {
	b := l.instr.Block()
	pos := token.NoPos
	for k := len(b.Instrs) - 1; k >= 0 && !pos.IsValid(); k-- {
		pos = bodyPos(b.Instrs[k])
	}
	if iff, ok := l.instr.(*ssa.If); ok {
		if c, ok := iff.Cond.(ssa.Instruction); ok && bodyPos(c).IsValid() {
			pos = bodyPos(c)
		}
	}
	for c := b; !pos.IsValid() && len(c.Preds) > 0 && c != c.Preds[0]; {
		c = c.Preds[0]
		if !c.Dominates(b) {
			break
		}
		for k := len(c.Instrs) - 1; k >= 0 && !pos.IsValid(); k-- {
			pos = bodyPos(c.Instrs[k])
		}
	}
	if !pos.IsValid() {
		return nil
	}
	jump := func(list []ast.Stmt) ast.Node {
		if len(list) > 0 {
			if s, ok := list[len(list)-1].(*ast.BranchStmt); ok && (s.Tok == token.CONTINUE || s.Tok == token.GOTO) {
				return s
			}
		}
		return nil
	}
	_, branches := l.instr.(*ssa.If)
	for _, n := range m.enclosing(pos) {
		switch n := n.(type) {
		case *ast.IfStmt:
			// The branch goes round without a block of its own.
			if branches && pos >= n.Cond.Pos() && pos < n.Cond.End() {
				if l.side == 0 && len(n.Body.List) == 1 {
					if s := jump(n.Body.List); s != nil {
						return s
					}
				}
				if e, ok := n.Else.(*ast.BlockStmt); ok && l.side == 1 && len(e.List) == 1 {
					if s := jump(e.List); s != nil {
						return s
					}
				}
			}
		case *ast.BlockStmt:
			if s := jump(n.List); s != nil && !branches {
				return s
			}
		case *ast.CaseClause:
			if s := jump(n.Body); s != nil && !branches {
				return s
			}
		case *ast.CommClause:
			if s := jump(n.Body); s != nil && !branches {
				return s
			}
		case *ast.ForStmt:
			if pos >= n.Body.Pos() && pos < n.Body.End() {
				return n.Body
			}
		case *ast.RangeStmt:
			if pos >= n.Body.Pos() && pos < n.Body.End() {
				return n.Body
			}
		case *ast.FuncLit, *ast.FuncDecl:
			return nil
		}
	}
	return nil
}

// rangeAt is the range statement that the call of an iterator stands for, nil
// for an ordinary call.
func (m *Model) rangeAt(c ssa.CallInstruction) *ast.RangeStmt {
	for _, a := range c.Common().Args {
		mc, ok := a.(*ssa.MakeClosure)
		if !ok || mc.Fn.(*ssa.Function).Synthetic != "range-over-func yield" {
			continue
		}
		if rs, ok := mc.Fn.(*ssa.Function).Syntax().(*ast.RangeStmt); ok {
			return rs
		}
	}
	return nil
}

// loopOf finds the range statement of a loop header.
func (m *Model) loopOf(i *ssa.If) *ast.RangeStmt {
	for _, b := range []*ssa.BasicBlock{i.Block().Succs[0], i.Block()} {
		for _, instr := range b.Instrs {
			if p := bodyPos(instr); p.IsValid() {
				for _, n := range m.enclosing(p) {
					if rs, ok := n.(*ast.RangeStmt); ok {
						return rs
					}
				}
			}
		}
	}
	return nil
}

// ifAround finds the condition of the if or for statement that the branch i
// stands for, when the condition itself does not show it (a parameter, a φ, a
// value that was computed earlier), with the truth that the source's condition
// has on the given side; nil if it cannot be told.
func (m *Model) ifAround(i *ssa.If, truth bool) (ast.Expr, bool) {
	for side, b := range i.Block().Succs {
		cond := m.bodyOf(b)
		if cond == nil {
			continue
		}
		// The body stands behind the side on which the source's condition is true.
		holds := truth == (side == 0)
		for {
			u, ok := cond.(*ast.UnaryExpr)
			if !ok || u.Op != token.NOT {
				break
			}
			cond, holds = u.X, !holds
		}
		switch cond.(type) {
		case *ast.Ident, *ast.SelectorExpr, *ast.CallExpr, *ast.IndexExpr, *ast.StarExpr:
			return cond, holds
		case *ast.BinaryExpr:
			if _, ok := i.Cond.(*ssa.BinOp); ok {
				return simpleCond(cond), holds
			}
		}
	}
	return nil, false
}

// bodyOf is the condition of the statement whose body block b starts.
func (m *Model) bodyOf(b *ssa.BasicBlock) ast.Expr {
	if len(b.Preds) != 1 {
		return nil
	}
	for _, instr := range b.Instrs {
		p := bodyPos(instr)
		if !p.IsValid() {
			continue
		}
		for _, n := range m.enclosing(p) {
			switch s := n.(type) {
			case *ast.IfStmt:
				if p >= s.Body.Pos() && p < s.Body.End() {
					return s.Cond
				}
				return nil
			case *ast.ForStmt:
				if s.Cond != nil && p >= s.Body.Pos() && p < s.Body.End() {
					return s.Cond
				}
				return nil
			case *ast.RangeStmt, *ast.CaseClause, *ast.CommClause, *ast.FuncLit, *ast.FuncDecl:
				return nil
			}
		}
	}
	return nil
}

// selectStep shows which case of a select was chosen.
func (m *Model) selectStep(st *properties.Step, cond ssa.Value, truth bool) bool {
	b, ok := cond.(*ssa.BinOp)
	if !ok || b.Op != token.EQL {
		return false
	}
	x, ok := b.X.(*ssa.Extract)
	k, isConst := b.Y.(*ssa.Const)
	if !ok || !isConst || x.Index != 0 {
		return false
	}
	sel, ok := x.Tuple.(*ssa.Select)
	if !ok || k.Int64() < 0 || k.Int64() >= int64(len(sel.States)) {
		return false
	}
	for _, n := range m.enclosing(sel.States[k.Int64()].Pos) {
		if cc, ok := n.(*ast.CommClause); ok && cc.Comm != nil {
			st.Place, st.Text = m.at(cc.Pos()), "case "+m.nodeText(cc.Comm)
			if !truth {
				st.Text = "another case than " + m.nodeText(cc.Comm)
			}
			return true
		}
	}
	return false
}

func simpleCond(e ast.Expr) ast.Expr {
	if b, ok := e.(*ast.BinaryExpr); ok && (b.Op == token.LAND || b.Op == token.LOR) {
		return nil
	}
	return e
}

// ssaCond puts a condition into words without its source.
func (m *Model) ssaCond(v ssa.Value, truth bool) string {
	word := " is true"
	if !truth {
		word = " is false"
	}
	switch v := v.(type) {
	case *ssa.UnOp:
		if v.Op == token.NOT {
			return m.ssaCond(v.X, !truth)
		}
	case *ssa.BinOp:
		x, y := m.valueText(v.X), m.valueText(v.Y)
		if x != "" && y != "" {
			return x + " " + v.Op.String() + " " + y + word
		}
	}
	if s := m.valueText(v); s != "" {
		return s + word
	}
	return "the condition" + word
}

func (m *Model) valueText(v ssa.Value) string {
	switch v := v.(type) {
	case *ssa.Const:
		if v.Value == nil {
			return "nil"
		}
		return v.Value.String()
	case *ssa.Parameter:
		return v.Name()
	case *ssa.Phi:
		return v.Comment
	case *ssa.UnOp:
		if v.Op == token.MUL {
			return m.valueText(v.X)
		}
		if v.Op == token.ARROW {
			return "the received value"
		}
	case *ssa.Alloc:
		return v.Comment
	case *ssa.FreeVar:
		return v.Name()
	case *ssa.Global:
		return v.Name()
	case *ssa.FieldAddr:
		if x := m.valueText(v.X); x != "" {
			return x + "." + structField(v.X.Type(), v.Field).Name()
		}
	case *ssa.Call:
		return m.callText(v)
	case *ssa.Extract:
		if c, ok := v.Tuple.(*ssa.Call); ok {
			t := c.Call.Signature().Results().At(v.Index).Type()
			if types.Identical(t, errorType) {
				return "the error of " + m.calleeText(c)
			}
			return "a result of " + m.calleeText(c)
		}
		if _, ok := v.Tuple.(*ssa.TypeAssert); ok {
			return "the type assertion"
		}
		if _, ok := v.Tuple.(*ssa.Select); ok {
			return "the chosen case"
		}
	}
	return ""
}

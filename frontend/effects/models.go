package effects

// This file holds what is known of functions whose bodies are not loaded, with
// reasons. The models of how a call ends hold for loaded bodies too: those
// functions end in code that is written in assembly or bound by linkname.

import (
	"fmt"
	"go/types"
	"strings"

	"pathtally/frontend/load"

	"golang.org/x/tools/go/ssa"
)

// model is the knowledge about one function. The zero model knows nothing.
type model struct {
	known    bool
	exits    Exit      // 0: by body, or returns
	noWrites bool      // overwrites nothing that its arguments reach
	noCalls  bool      // calls back nothing that it is handed
	pure     bool      // see Summary.PureGetter
	nilness  []Nilness // by result; short: unknown
	nilIff   []int     // by result: parameter + 1 that is nil exactly if the result is, 0 none
	joinsNil bool      // result 0 is nil iff all elements of the variadic parameter are
	keeps    bool      // keeps its arguments
	stores   bool      // stores its arguments into what the receiver reaches
	noFlow   bool      // results reach nothing of the arguments
}

// exitOf translates what is known of functions that no normal return leaves.
func exitOf(k load.NoReturnKind) Exit {
	switch k {
	case load.Returns:
		return 0
	case load.Exits:
		return ExitsAll
	case load.Goexits:
		return Goexits
	case load.Panics:
		return Panics
	}
	panic(fmt.Sprintf("effects: unknown kind %v of functions that do not return", k))
}

// purePackages hold functions that compute values from values: they store
// nothing that outlives the call, and their results share no memory with
// variables of the caller but by design of the argument.
var purePackages = map[string]bool{
	"cmp": true, "math": true, "math/bits": true, "math/cmplx": true, "path": true,
	"strconv": true, "strings": true, "unicode": true, "unicode/utf16": true, "unicode/utf8": true,
}

// quietPackages hold functions that write into nothing that their arguments
// reach.
var quietPackages = map[string]bool{
	"errors": true, "path/filepath": true, "time": true, "regexp": true, "context": true,
}

var known = map[string]model{
	// Both allocate the error that they return.
	"errors.New":  {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}, noFlow: true},
	"fmt.Errorf":  {noWrites: true, nilness: []Nilness{NonNil}},
	"errors.Join": {noWrites: true, noCalls: true, joinsNil: true},
	// As reads what is stored behind its second argument and sets it.
	"errors.As": {},
	"errors.Is": {noWrites: true},
	// Printing reads its operands; the writer is called.
	"fmt.Print": {noWrites: true}, "fmt.Printf": {noWrites: true}, "fmt.Println": {noWrites: true},
	"fmt.Sprint": {noWrites: true, noFlow: true}, "fmt.Sprintf": {noWrites: true, noFlow: true}, "fmt.Sprintln": {noWrites: true, noFlow: true},
	"fmt.Fprint": {}, "fmt.Fprintf": {}, "fmt.Fprintln": {},
	// A nil parent makes them panic; the context is allocated.
	"context.Background":    {noWrites: true, noCalls: true, pure: true, nilness: []Nilness{NonNil}, noFlow: true},
	"context.TODO":          {noWrites: true, noCalls: true, pure: true, nilness: []Nilness{NonNil}, noFlow: true},
	"context.WithCancel":    {noWrites: true, nilness: []Nilness{NonNil, NonNil}},
	"context.WithTimeout":   {noWrites: true, nilness: []Nilness{NonNil, NonNil}},
	"context.WithDeadline":  {noWrites: true, nilness: []Nilness{NonNil, NonNil}},
	"context.WithValue":     {noWrites: true, nilness: []Nilness{NonNil}},
	"context.WithoutCancel": {noWrites: true, nilness: []Nilness{NonNil}},
	// A copy of nil is nil, and of nothing else.
	"bytes.Clone":  {noWrites: true, noCalls: true, nilIff: []int{1}},
	"slices.Clone": {noWrites: true, noCalls: true, nilIff: []int{1}},
	"maps.Clone":   {noWrites: true, noCalls: true, nilIff: []int{1}},
	// Constructors that return the address of what they allocate.
	"bytes.NewBuffer":       {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"bytes.NewBufferString": {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"bytes.NewReader":       {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"strings.NewReader":     {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"strings.NewReplacer":   {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"bufio.NewReader":       {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"bufio.NewReaderSize":   {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"bufio.NewWriter":       {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"bufio.NewWriterSize":   {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"bufio.NewScanner":      {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"sync.NewCond":          {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"time.NewTimer":         {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"time.NewTicker":        {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"time.After":            {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"time.AfterFunc":        {noWrites: true, keeps: true, nilness: []Nilness{NonNil}},
	"regexp.MustCompile":    {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"log.New":               {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	"log.Default":           {noWrites: true, noCalls: true, nilness: []Nilness{NonNil}},
	// The argument stays behind in the receiver.
	"(*container/list.List).PushBack":          {stores: true, noCalls: true, nilness: []Nilness{NonNil}},
	"(*container/list.List).PushFront":         {stores: true, noCalls: true, nilness: []Nilness{NonNil}},
	"(*sync.Map).Store":                        {stores: true, noCalls: true},
	"(*sync.Map).LoadOrStore":                  {stores: true, noCalls: true},
	"(*sync.Map).Swap":                         {stores: true, noCalls: true},
	"(*sync.Pool).Put":                         {stores: true, noCalls: true},
	"(*sync/atomic.Value).Store":               {stores: true, noCalls: true},
	"(*sync/atomic.Value).Swap":                {stores: true, noCalls: true},
	"(*sync/atomic.Pointer[T]).Store":          {stores: true, noCalls: true},
	"(*sync/atomic.Pointer[T]).Swap":           {stores: true, noCalls: true},
	"(*sync/atomic.Pointer[T]).CompareAndSwap": {stores: true, noCalls: true},
	"(*bufio.Reader).Reset":                    {stores: true, noCalls: true},
	"(*bufio.Writer).Reset":                    {stores: true, noCalls: true},
	"(*log.Logger).SetOutput":                  {stores: true, noCalls: true},
	// The argument stays behind in variables of the callee's package.
	"runtime.SetFinalizer": {keeps: true, noWrites: true, noCalls: true},
	"net/http.Handle":      {keeps: true, noWrites: true, noCalls: true},
	"net/http.HandleFunc":  {keeps: true, noWrites: true, noCalls: true},
	"os/signal.Notify":     {keeps: true, noWrites: true, noCalls: true},
	"log.SetOutput":        {keeps: true, noWrites: true, noCalls: true},
}

// modelOf returns what is known of fn without looking at its body.
func modelOf(fn *ssa.Function) model {
	name := fullName(fn)
	if name == "" {
		return model{}
	}
	if e := exitOf(load.NoReturn(fn.Object().(*types.Func))); e != 0 {
		return model{known: true, exits: e, noWrites: true, noFlow: true}
	}
	if m, ok := known[name]; ok {
		m.known = true
		return m
	}
	obj := fn.Object()
	if obj.Pkg() == nil {
		return model{}
	}
	path := obj.Pkg().Path()
	sig := fn.Signature
	switch {
	case purePackages[path] && sig.Recv() == nil && !strings.HasPrefix(obj.Name(), "New"):
		m := model{known: true, noWrites: !strings.HasPrefix(obj.Name(), "Append")}
		m.pure = m.noWrites && onlyPlain(sig.Params()) && onlyPlain(sig.Results())
		m.noCalls = m.pure
		return m
	case quietPackages[path] && sig.Recv() == nil:
		return model{known: true, noWrites: true}
	}
	return model{}
}

// onlyPlain says whether all variables are numbers, booleans and strings.
func onlyPlain(tuple *types.Tuple) bool {
	for v := range tuple.Variables() {
		b, ok := v.Type().Underlying().(*types.Basic)
		if !ok || b.Kind() == types.UnsafePointer {
			return false
		}
	}
	return true
}

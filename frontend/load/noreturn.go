package load

import (
	"fmt"
	"go/types"
)

// NoReturnKind says in which way a function that never returns ends.
type NoReturnKind uint8

const (
	// Returns: nothing is known; calls of it may return.
	Returns NoReturnKind = iota
	// Exits: the process ends. No deferred call runs, in no goroutine.
	Exits
	// Goexits: the goroutine ends. Its deferred calls run; recover sees nothing.
	Goexits
	// Panics: a panic as by the panic statement. Deferred calls run and may recover.
	Panics
)

func (k NoReturnKind) String() string {
	switch k {
	case Returns:
		return "returns"
	case Exits:
		return "exits"
	case Goexits:
		return "goexits"
	case Panics:
		return "panics"
	}
	return fmt.Sprintf("NoReturnKind(%d)", uint8(k))
}

// NoReturn tells how a call of fn ends if it never returns. It knows the
// functions of the standard library only; whether a function of the module
// returns is for its own body to say.
//
// It looks at names, so it answers alike whether the body was loaded or not,
// and alike for a method of an interface ((testing.TB).FailNow) and for its
// implementations. fn may be nil.
//
// In SSA a call of such a function is followed by a Panic of the constant
// "noreturn"; that Panic stands for what NoReturn says of the call before it.
func NoReturn(fn *types.Func) NoReturnKind {
	if fn == nil || fn.Pkg() == nil {
		return Returns
	}
	name := fn.Name()
	method := fn.Signature().Recv() != nil
	switch fn.Pkg().Path() {
	case "os":
		if name == "Exit" && !method {
			return Exits
		}
	case "syscall":
		if name == "Exit" && !method {
			return Exits
		}
	case "log":
		switch name { // functions, and methods of *log.Logger
		case "Fatal", "Fatalf", "Fatalln":
			return Exits
		case "Panic", "Panicf", "Panicln":
			return Panics
		}
	case "testing":
		switch name { // methods of *testing.common and of testing.TB
		case "FailNow", "Fatal", "Fatalf", "Skip", "Skipf", "SkipNow":
			if method {
				return Goexits
			}
		}
	case "runtime":
		if method {
			break
		}
		switch name {
		case "Goexit":
			return Goexits
		case "exit", "throw", "fatal", "fatalthrow", "fatalpanic":
			return Exits
		}
	case "sync", "internal/sync", "internal/runtime/maps":
		if !method && (name == "throw" || name == "fatal") {
			return Exits
		}
	}
	return Returns
}

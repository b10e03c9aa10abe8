package t

import (
	"io"
	"os"
)

type W struct{ n int }

func (w *W) Write(p []byte) (int, error) { w.n++; return 1, nil }

// want toAny exits: returns|blind
// want toAny writes: p0{.n}; p1{elem byte}
// want toAny !r1
// want toAny !pure
func toAny(w io.Writer, p []byte) (int, error) { return w.Write(p) }

func conv() { toAny(&W{}, nil) }

// want noneKnown exits: returns|blind
// want noneKnown !r1
func noneKnown(r io.Reader, p []byte) (int, error) { return r.Read(p) }

type Hook func() error

func fails() error { return &E{} }

type E struct{ s string }

func (e *E) Error() string { return e.s }

// A value of a type of ours comes from code of ours.
//
// want hook r0: never nil
// want hook exits: returns
func hook(h Hook) error { return h() }

// want anyFunc !r0
// want anyFunc exits: returns|blind
func anyFunc(h func() error) error { return h() }

func use() { hook(fails); os.Exit(1) }

// The text of an error changes nothing.
//
// want text !writes
func text(err error) string { return err.Error() }

// want viaVar r0: never nil
func viaVar() error {
	f := fails
	return f()
}

// want loopClosure r0: never nil
func loopClosure(n int) error {
	var walk func(int) error
	walk = func(k int) error {
		if k == 0 {
			return fails()
		}
		return walk(k - 1)
	}
	return walk(n)
}

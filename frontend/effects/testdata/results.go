package t

import (
	"errors"
	"fmt"
	"io"
	"os"
	"strings"
)

var ErrA = errors.New("a")
var ErrB = fmt.Errorf("b")
var errC error
var ErrD = ErrA
var ErrE = mk()

func mk() error { return &E{} }

type E struct{ s string }

func (e *E) Error() string { return e.s }

func setC(e error) { errC = e }

// want retA r0: never nil
func retA() error { return ErrA }

// want retB r0: never nil
func retB() error { return ErrB }

// want retC !r0
func retC() error { return errC }

// want retD r0: never nil
func retD() error { return ErrD }

// want retE r0: never nil
func retE() error { return ErrE }

// want retEOF r0: never nil
func retEOF() error { return io.EOF }

// want nilErr r0: always nil
func nilErr() error { return nil }

// want konst r0: = 3
func konst() int { return 3 }

// want same r0: p0
func same(e *E) *E { return e }

// want viaSame r0: p1
func viaSame(a, b *E) *E { return same(b) }

// want field r0: p0.s*
func (e *E) str() string { return e.s }

// want (*E).str r0: p0.s*
// want (*E).str pure
func field(e *E) string { return e.str() }

// want addr r0: never nil, p0.s
func addr(e *E) *string { return &e.s }

// want wrap r0: nil iff p0
func wrap(err error) error {
	if err == nil {
		return nil
	}
	return fmt.Errorf("wrap: %w", err)
}

// want viaWrap r0: nil iff p0
func viaWrap(err error) error { return wrap(err) }

// want open r0: non-nil if ok, nil if failed
func open(c bool) (*E, error) {
	if c {
		return nil, ErrA
	}
	return &E{}, nil
}

// want viaOpen r0: non-nil if ok, nil if failed
func viaOpen(c bool) (*E, error) { return open(c) }

// want checkOpen r0: non-nil if ok, nil if failed
func checkOpen(c bool) (*E, error) {
	e, err := open(c)
	if err != nil {
		return nil, wrap(err)
	}
	return e, nil
}

// want noCorr !r0
func noCorr(c bool) (*E, error) {
	if c {
		return &E{}, ErrA
	}
	return nil, nil
}

// want lookup r0: non-nil if ok, nil if failed
func lookup(m map[string]bool, k string) (*E, bool) {
	if m[k] {
		return &E{}, true
	}
	return nil, false
}

// want deferred r0: never nil
func deferred() (err error) {
	defer fmt.Sprintf("x")
	return ErrA
}

// want recovering !r0
func recovering() (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = nil
		}
	}()
	return ErrA
}

// want joined r0: never nil
func joined(e error) error { return errors.Join(e, ErrA) }

// want joinNil r0: always nil
func joinNil() error { return errors.Join(nil, nil) }

// want upper pure
func upper(s string) string { return strings.ToUpper(s) }

// want recur r0: never nil
func recur(n int) *E {
	if n == 0 {
		return &E{}
	}
	return recur(n - 1)
}

// want file !r0: never
func file() (*os.File, error) { return os.Open("x") }

// want mutated !r0: p0
func mutated(e *E) string {
	s := e.s
	e.s = "new"
	return s
}

// want phi r0: never nil
func phi(c bool) error {
	err := ErrA
	if c {
		err = ErrB
	}
	return err
}

// want def r0: never nil
func def(e *E) *E {
	if e == nil {
		e = &E{}
	}
	return e
}

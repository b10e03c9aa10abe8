package t

import (
	"log"
	"os"
	"runtime"
)

// want pan exits: panics
func pan() { panic("x") }

// want maybe exits: returns|panics
func maybe(c bool) {
	if c {
		pan()
	}
}

// want exit exits: exits
func exit() { os.Exit(1) }

// want fatal exits: exits
func fatal() {
	log.Fatalf("x")
	panic("never")
}

// want goexit exits: goexits
func goexit() { runtime.Goexit() }

// want forever exits: blocks
func forever() { select {} }

// want loop exits: blocks
func loop() {
	for {
	}
}

// want loopRet exits: returns
func loopRet(c chan int) {
	for {
		if <-c == 0 {
			return
		}
	}
}

// want self exits: none
func self() { self() }

// want safe exits: returns
func safe() {
	defer func() { recover() }()
	pan()
}

// want safeLate exits: returns|panics
func safeLate(c bool) {
	if c {
		pan()
	}
	defer func() { _ = recover() }()
	pan()
}

// want mayRecover exits: returns|panics
func mayRecover(c bool) {
	defer func() {
		if c {
			recover()
		}
	}()
	pan()
}

// want again exits: returns|panics
func again() {
	defer func() {
		recover()
		panic("again")
	}()
	pan()
}

// want noRecover exits: panics
func noRecover() {
	defer recover()
	pan()
}

// want spawn exits: returns|spawns
func spawn() { go pan() }

// want sel exits: returns
func sel(a, b chan int) {
	select {
	case <-a:
	case <-b:
	}
}

// want deferExit exits: exits
func deferExit() { defer os.Exit(1) }

// want word exits: panics
func word() { panic("noreturn") }

type seq func(yield func(int) bool)

func upto(yield func(int) bool) {
	for i := 0; i < 3; i++ {
		if !yield(i) {
			return
		}
	}
}

// want rangeFunc exits: returns|blind
func rangeFunc() (n int) {
	for i := range upto {
		n += i
	}
	return
}

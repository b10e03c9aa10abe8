package lia

import (
	"flag"
	"os"
	"testing"
)

// long makes the random tests ten times longer and compares with cvc5.
var long bool

func TestMain(m *testing.M) {
	flag.BoolVar(&long, "long", os.Getenv("PATHTALLY_LONG") == "1", "run the long random tests")
	flag.Parse()
	os.Exit(m.Run())
}

package sparse

import (
	"flag"
	"os"
	"testing"

	_ "pgregory.net/rapid" // defines the flag
)

// TestMain draws the same random inputs in every run, unless -rapid.seed asks for others.
func TestMain(m *testing.M) {
	flag.Parse()
	if seed := flag.Lookup("rapid.seed"); seed.Value.String() == seed.DefValue {
		if err := seed.Value.Set("20261"); err != nil {
			panic(err)
		}
	}
	os.Exit(m.Run())
}

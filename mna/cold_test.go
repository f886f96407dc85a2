package mna

import (
	"context"
	"errors"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

// bareJunctions takes the capacitors across the junctions of a random network away: transit times alone are left.
func bareJunctions(n *net) *net {
	n.devices = slices.DeleteFunc(n.devices, func(d placed) bool {
		return strings.HasPrefix(d.name, "Cak") || strings.HasPrefix(d.name, "Cbe") || strings.HasPrefix(d.name, "Cbc")
	})
	return n
}

// TestBareJunctionsStartCold: the charge of a junction with nothing but a transit time grows by ten decades as it turns on, within the first implicit
// step of a cold run.
func TestBareJunctionsStartCold(t *testing.T) {
	const networks, until, least = 200, 0.1e-3, 150
	ran := 0
	for seed := range uint64(networks) {
		n := bareJunctions(tangle(t, rand.New(rand.NewPCG(seed, 5)), false))
		n.hold("drive", sine{2, 1e3})
		n.add("Rdrive", resistor(1e3), "drive", "n2")
		s, err := n.Build()
		if err != nil {
			continue // voltage sources in a loop
		}
		_, err = s.Transient(context.Background(), TransientOptions{Cold: true, Until: until}, func(*Step) error { return nil })
		if singular := (*SingularError)(nil); errors.As(err, &singular) {
			continue
		}
		require.NoError(t, err, "seed %d", seed)
		ran++
	}
	require.Greater(t, ran, least)
}

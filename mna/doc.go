// Package mna solves circuits by modified nodal analysis (Ho, Ruehli & Brennan, The modified nodal approach to network analysis, IEEE Trans.
// Circuits Syst. 22, 1975, 504-509): the one system of equations
//
//	f(x, t) + d/dt q(x, t) = 0
//
// for anything that implements [Device]. The unknowns x are node voltages and the branch currents that devices ask for. Nodes that an ideal source holds against
// ground are given, not unknown.
//
//	b := mna.NewBuilder()
//	in, out := b.Node("in"), b.Node("out")
//	err := b.Hold(in, signal)              // an ideal source against ground
//	r := b.Add("R1", device, in, out)      // one node for each pin
//	s, err := b.Build()                    // immutable, for any number of goroutines
//	bias, err := s.Bias(ctx, mna.BiasOptions{})
//	v := s.Small(bias.X, 0).Solver()       // (G + j omega C) X = B
//	stats, err := s.Transient(ctx, mna.TransientOptions{Until: 1e-3}, func(p *mna.Step) error { ... })
//	p := s.Probe(r)                        // currents into pins, operating quantities
//
// Names: x the unknowns, u an [Unknown], k a [Slot] or an unknown's index in a loop, w a workspace, e an [Eval]; G = df/dx and C = dq/dx;
// alpha (1/s) the weight of the charges in an implicit step. Slices by unknown have the layout of x; "of the free unknowns" means without ground and the
// held nodes.
package mna

package mna

import "poise/mna/sparse"

// System is a built circuit: immutable and safe for any number of goroutines, each of which gets a workspace of its own.
type System struct {
	unknown   []Unknown // of each node
	names     []string  // of each unknown
	branch    []bool    // of each unknown: a branch current
	diagonal  []Slot    // of each unknown that is a node: its own slot, 0 for a branch
	held      []Signal  // of unknowns 1 .. len(held)
	signals   []Signal  // all independent sources, held ones last
	devices   []placed
	stamps    []Stamp     // of each device
	internals [][]Unknown // of each device

	touched    []Unknown // the rows that the devices add to, device after device
	touchedEnd []int     // of each device: the end of its part of touched

	junctions  int
	slots      int
	rows, cols []int32 // of each slot, in the whole system
	free       []spot  // the slots among the free unknowns
	analysis   *sparse.Analysis
}

// spot is where a slot stands, in the whole system.
type spot struct{ slot, row, col int32 }

// Unknown returns the place of a node in the solution.
func (s *System) Unknown(node int) Unknown { return s.unknown[node] }

// Name returns the name of an unknown: the node's, or the device's with what is inside it.
func (s *System) Name(u Unknown) string { return s.names[u] }

// Size returns the length of a solution vector.
func (s *System) Size() int { return len(s.names) }

// Held returns the number of held nodes: unknowns 1 to Held are given, the others are solved for.
func (s *System) Held() int { return len(s.held) }

// Unknowns returns the unknowns of a device's pins and of its inside, in the order in which it asked for them.
func (s *System) Unknowns(device int) (pins, internals []Unknown) {
	for _, node := range s.devices[device].nodes {
		pins = append(pins, s.unknown[node])
	}
	return pins, append([]Unknown(nil), s.internals[device]...)
}

// first is the index of the first free unknown.
func (s *System) first() int { return len(s.held) + 1 }

// hold writes the voltages of the held nodes at time t in s.
func (s *System) hold(x []float64, t, drive float64) {
	x[0] = 0
	for i, signal := range s.held {
		x[i+1] = drive * signal.At(t)
	}
}

// holdOne writes the voltage of a node at time t in s if it is held or ground.
func (s *System) holdOne(u Unknown, x []float64, t float64) {
	switch {
	case u == Ground:
		x[u] = 0
	case int(u) <= len(s.held):
		x[u] = s.held[u-1].At(t)
	}
}

package mna

import (
	"fmt"

	"poise/mna/sparse"
)

// Builder collects the nodes and devices of a circuit.
type Builder struct {
	nodes   []string
	holds   map[int]Signal
	order   []int // held nodes in the order of Hold
	devices []placed
}

// placed is a device with its name and the nodes of its pins.
type placed struct {
	name   string
	device Device
	nodes  []int
}

// NewBuilder returns a builder with node 0, the ground, alone.
func NewBuilder() *Builder {
	return &Builder{nodes: []string{"gnd"}, holds: map[int]Signal{}}
}

// Node adds a node and returns its number, counted from 1.
func (b *Builder) Node(name string) int {
	b.nodes = append(b.nodes, name)
	return len(b.nodes) - 1
}

// Hold connects an ideal source of s volts between a node and ground. The node's voltage is then given and
// no unknown. Holding a node twice, or the ground, is a *HoldError.
func (b *Builder) Hold(node int, s Signal) error {
	if node <= 0 || node >= len(b.nodes) {
		return &HoldError{Node: b.nodes[0]}
	}
	if _, ok := b.holds[node]; ok {
		return &HoldError{Node: b.nodes[node]}
	}
	b.holds[node] = s
	b.order = append(b.order, node)
	return nil
}

// HoldError says that two ideal voltage sources meet at a node.
type HoldError struct {
	Node string
}

func (e *HoldError) Error() string {
	return fmt.Sprintf("the node %s is held by two ideal voltage sources", e.Node)
}

// Add connects a device to nodes, one for each of its pins, and returns its number, counted from 0.
func (b *Builder) Add(name string, d Device, nodes ...int) int {
	b.devices = append(b.devices, placed{name, d, nodes})
	return len(b.devices) - 1
}

// System is a built circuit: immutable and safe for any number of goroutines, each with a workspace of its own.
type System struct {
	unknown   []Unknown // of each node
	names     []string  // of each unknown
	held      []Signal  // of unknowns 1 .. len(held)
	devices   []placed
	stamps    []Stamp
	internals [][]Unknown // of each device
	branch    []bool      // whether an unknown is a branch current
	junctions int
	slots     int
	rows      []int32 // of each slot: row and column of the whole system, for products
	cols      []int32
	analysis  *sparse.Analysis
	singular  error // why the pattern has no factors, if it has none
	timed     []Signal
	diagonal  []Slot // of each unknown that is a node: its own slot
}

// Build gives every unknown its place and analyses the pattern of the equations.
func (b *Builder) Build() (*System, error) {
	s := &System{unknown: make([]Unknown, len(b.nodes)), devices: b.devices}
	s.names = append(s.names, b.nodes[0])
	for i, node := range b.order {
		s.unknown[node] = Unknown(i + 1)
		s.names = append(s.names, b.nodes[node])
		s.held = append(s.held, b.holds[node])
	}
	for node := 1; node < len(b.nodes); node++ {
		if _, ok := b.holds[node]; !ok {
			s.unknown[node] = Unknown(len(s.names))
			s.names = append(s.names, b.nodes[node])
		}
	}
	s.branch = make([]bool, len(s.names))
	s.bind()
	return s, s.analyse()
}

// bind connects the devices.
func (s *System) bind() {
	b := &binding{system: s, slot: map[[2]Unknown]Slot{}, rows: []int32{-1}, cols: []int32{-1}}
	for u := 1; u < len(s.names); u++ {
		s.diagonal = append(s.diagonal, b.Slot(Unknown(u), Unknown(u)))
	}
	s.diagonal = append([]Slot{0}, s.diagonal...)
	for _, d := range s.devices {
		b.device, b.internals = d, nil
		stamp := d.device.Bind(b)
		s.stamps = append(s.stamps, stamp)
		s.internals = append(s.internals, b.internals)
		if t, ok := stamp.(Timed); ok {
			s.timed = append(s.timed, t.Signal())
		}
	}
	s.slots, s.rows, s.cols, s.junctions = len(b.rows), b.rows, b.cols, b.junctions
}

// binding is the Binder of a whole system.
type binding struct {
	system     *System
	device     placed
	internals  []Unknown
	slot       map[[2]Unknown]Slot
	rows, cols []int32
	junctions  int
}

func (b *binding) Pin(i int) Unknown { return b.system.unknown[b.device.nodes[i]] }

func (b *binding) Internal(name string) Unknown { return b.add(name, false) }

func (b *binding) Branch(name string) Unknown { return b.add(name, true) }

func (b *binding) add(name string, branch bool) Unknown {
	u := Unknown(len(b.system.names))
	b.system.names = append(b.system.names, b.device.name+"."+name)
	b.system.branch = append(b.system.branch, branch)
	b.internals = append(b.internals, u)
	own := Slot(0)
	if !branch {
		own = b.Slot(u, u)
	}
	b.system.diagonal = append(b.system.diagonal, own)
	return u
}

func (b *binding) Slot(row, col Unknown) Slot {
	if row == Ground || col == Ground {
		return 0
	}
	key := [2]Unknown{row, col}
	if s, ok := b.slot[key]; ok {
		return s
	}
	s := Slot(len(b.rows))
	b.slot[key] = s
	b.rows = append(b.rows, int32(row))
	b.cols = append(b.cols, int32(col))
	return s
}

func (b *binding) Junction() int {
	b.junctions++
	return b.junctions - 1
}

// analyse orders the equations of the free unknowns.
func (s *System) analyse() error {
	first := int32(len(s.held) + 1)
	rows, cols := make([]int32, s.slots), make([]int32, s.slots)
	for k := range rows {
		rows[k], cols[k] = s.rows[k]-first, s.cols[k]-first
		if rows[k] < 0 || cols[k] < 0 {
			rows[k], cols[k] = -1, -1
		}
	}
	p, err := sparse.NewPattern(len(s.names)-int(first), rows, cols)
	if err != nil {
		return err
	}
	s.analysis, err = sparse.Analyse(p)
	return s.explain(err)
}

package mna

import "fmt"

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
// no unknown. Holding a node twice, or the ground, is a *HoldError; a node that was never added is a *NodeError.
func (b *Builder) Hold(node int, s Signal) error {
	if node < 0 || node >= len(b.nodes) {
		return &NodeError{Node: node}
	}
	if _, ok := b.holds[node]; ok || node == 0 {
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

// NodeError says that a connection goes to a node that does not exist, or that a device has more pins than connections.
type NodeError struct {
	Device string // "" for a held node
	Node   int    // as given; -1 for a missing connection
	Pin    int
}

func (e *NodeError) Error() string {
	switch {
	case e.Device == "":
		return fmt.Sprintf("there is no node number %d to hold", e.Node)
	case e.Node == -1:
		return fmt.Sprintf("pin %d of %s is not connected", e.Pin, e.Device)
	}
	return fmt.Sprintf("pin %d of %s: there is no node number %d", e.Pin, e.Device, e.Node)
}

// Add connects a device to nodes, one for each of its pins, and returns its number, counted from 0.
func (b *Builder) Add(name string, d Device, nodes ...int) int {
	b.devices = append(b.devices, placed{name, d, append([]int(nil), nodes...)})
	return len(b.devices) - 1
}

// Build gives every unknown its place and analyses the pattern of the equations. It returns *NodeError, or
// *SingularError if no values of the parts could give the equations a unique solution.
func (b *Builder) Build() (*System, error) {
	for _, d := range b.devices {
		for pin, node := range d.nodes {
			if node < 0 || node >= len(b.nodes) {
				return nil, &NodeError{Device: d.name, Node: node, Pin: pin}
			}
		}
	}
	s := &System{unknown: make([]Unknown, len(b.nodes)), devices: append([]placed(nil), b.devices...)}
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
	if err := s.bind(); err != nil {
		return nil, err
	}
	if err := s.analyse(); err != nil {
		return nil, err
	}
	return s, nil
}

package mna

import "poise/mna/sparse"

// bind connects the devices.
func (s *System) bind() error {
	b := &binding{system: s, entries: newEntries(-1, len(s.devices))}
	s.diagonal = append(s.diagonal, 0)
	for u := 1; u < len(s.names); u++ {
		s.diagonal = append(s.diagonal, b.Slot(Unknown(u), Unknown(u)))
	}
	for i, d := range s.devices {
		b.device, b.internals = d, nil
		stamp := d.device.Bind(b)
		if b.missing != nil {
			return b.missing
		}
		s.stamps = append(s.stamps, stamp)
		s.internals = append(s.internals, b.internals)
		s.listRows(i)
		if t, ok := stamp.(Timed); ok {
			s.signals = append(s.signals, t.Signal())
		}
	}
	s.signals = append(s.signals, s.held...)
	s.slots, s.rows, s.cols, s.junctions = len(b.rows), b.rows, b.cols, b.junctions
	return nil
}

// listRows notes the rows that a device adds to, each once and without ground.
func (s *System) listRows(device int) {
	start := len(s.touched)
	pins, internals := s.Unknowns(device)
	for _, u := range append(pins, internals...) {
		known := u == Ground
		for _, v := range s.touched[start:] {
			known = known || v == u
		}
		if !known {
			s.touched = append(s.touched, u)
		}
	}
	s.touchedEnd = append(s.touchedEnd, len(s.touched))
}

// rowsOf returns the rows that a device adds to.
func (s *System) rowsOf(device int) []Unknown {
	start := 0
	if device > 0 {
		start = s.touchedEnd[device-1]
	}
	return s.touched[start:s.touchedEnd[device]]
}

// place is a row and a column.
type place struct{ row, col Unknown }

// binding is the Binder of a whole system.
type binding struct {
	system    *System
	device    placed
	internals []Unknown
	entries
	missing error
}

func (b *binding) Pin(i int) Unknown {
	if i < 0 || i >= len(b.device.nodes) {
		b.missing = &NodeError{Device: b.device.name, Node: -1, Pin: i}
		return Ground
	}
	return b.system.unknown[b.device.nodes[i]]
}

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

// entries gives Jacobian entries and junctions their places.
type entries struct {
	slot       map[place]Slot
	rows, cols []int32 // of each slot
	junctions  int
}

// entriesPerDevice is about how many entries a device has.
const entriesPerDevice = 8

// newEntries returns entries for a number of devices, with the dump in slot 0, whose row and column are as given.
func newEntries(dump int32, devices int) entries {
	return entries{slot: make(map[place]Slot, entriesPerDevice*devices), rows: []int32{dump}, cols: []int32{dump}}
}

// Slot returns the place of an entry, the dump's in the row or the column of ground.
func (n *entries) Slot(row, col Unknown) Slot {
	if row == Ground || col == Ground {
		return 0
	}
	key := place{row, col}
	if s, ok := n.slot[key]; ok {
		return s
	}
	s := Slot(len(n.rows))
	n.slot[key] = s
	n.rows = append(n.rows, int32(row))
	n.cols = append(n.cols, int32(col))
	return s
}

// Junction reserves the next junction.
func (n *entries) Junction() int {
	n.junctions++
	return n.junctions - 1
}

// analyse orders the equations of the free unknowns.
func (s *System) analyse() error {
	first := int32(s.first())
	rows, cols := make([]int32, s.slots), make([]int32, s.slots)
	for k := range rows {
		rows[k], cols[k] = s.rows[k]-first, s.cols[k]-first
		if rows[k] < 0 || cols[k] < 0 {
			rows[k], cols[k] = -1, -1
			continue
		}
		s.free = append(s.free, spot{int32(k), s.rows[k], s.cols[k]})
	}
	p, err := sparse.NewPattern(len(s.names)-int(first), rows, cols)
	if err != nil {
		return err
	}
	s.analysis, err = sparse.Analyse(p)
	return s.explain(err)
}

package mna

// Unknown is the index of one entry of the solution vector: a node voltage in
// volts or a branch current in amperes. [Ground] is the reference node.
//
// The vector X of an evaluation is laid out as
//
//	X[0]                 ground, always 0
//	X[1 .. held]         nodes held by ideal sources against ground (see [Builder.Hold])
//	X[held+1 .. n-1]     the free unknowns, which the solver finds
//
// F and Q have the same layout. Their entry 0 is a dump that nobody reads, so
// that a device never needs to ask whether a pin is grounded.
type Unknown int32

// Ground is the reference node; its voltage is 0 V by definition.
const Ground Unknown = 0

// Slot is the place of one Jacobian entry in the value arrays G and C of an
// evaluation. Slot 0 is a dump for entries in the row or the column of ground.
type Slot int32

// Signal is the value of an independent source over time.
type Signal interface {
	// At returns the value (V or A) at time t in seconds. Before a delay a
	// signal holds its first value.
	At(t float64) float64
	// Corner returns the first time strictly after t at which the signal or
	// its slope jumps, or +Inf if there is none.
	Corner(t float64) float64
	// Scale returns the shortest time, in seconds, in which the signal changes
	// character at or soon after t: a period of a carrier, an edge, a time constant.
	// The integrator takes no step longer than a fraction of it. +Inf for a constant.
	Scale(t float64) float64
}

// Device is a part of a circuit before it is connected. A device is immutable
// and may be bound any number of times.
type Device interface {
	// Bind connects the device: it asks b for its unknowns and its Jacobian slots and
	// returns what is evaluated. It is called once for every system built.
	Bind(b Binder) Stamp
}

// Binder gives a device its place in a system.
type Binder interface {
	// Pin returns the unknown of pin i, in the order of the device's pins.
	Pin(i int) Unknown
	// Internal adds a node inside the device; name is appended to the device's own name.
	Internal(name string) Unknown
	// Branch adds an unknown branch current in A and an equation of its own, whose row has
	// the same index.
	Branch(name string) Unknown
	// Slot returns the place of dF[row]/dX[col] (and dQ[row]/dX[col]) in G (and C).
	Slot(row, col Unknown) Slot
	// Junction reserves an entry of [Eval.Junctions] for a voltage whose steps the
	// device limits.
	Junction() int
}

// Stamp is a bound device. It holds no state: everything that changes from one evaluation to the next
// lives in the [Eval], so that one stamp serves any number of goroutines.
type Stamp interface {
	// Eval adds the device's terms at e.X and e.Time to e.F and e.G and, if e.Dynamic, to e.Q and e.C. It allocates nothing.
	//
	// F holds the sum of the currents that leave a node through the devices, in A,
	// or the equation of a branch in V; Q the charge (C) or flux (Wb) whose time derivative adds to it.
	Eval(e *Eval)
}

// Timed is implemented by stamps with a [Signal] of their own: the current sources and
// the voltage sources that are not held nodes.
type Timed interface {
	Signal() Signal
}

// Eval is one evaluation of f, q, G = df/dx and C = dq/dx.
type Eval struct {
	Time    float64   // s
	X       []float64 // V or A
	F, Q    []float64 // A or V; C or Wb
	G, C    []float64 // by Slot
	Dynamic bool      // Q and C are wanted too

	// Drive scales every independent source, 0 to 1. It is 1 except during source stepping.
	Drive float64

	// Cold asks charge-storing parts for the charge they are started with:
	// capacitors C*start, inductors L*start, all others their charge at X.
	Cold bool

	// Junctions holds, on entry, the junction voltages at which the last evaluation
	// was made and, on return, those of this one (V). If Limit is set, a device may
	// evaluate at a voltage nearer to the last one than X says; it then extends its currents
	// linearly from there to X and sets Limited.
	Junctions []float64
	Limit     bool
	Limited   bool
}

// Quantity is one operating quantity of a device, for instance a transconductance.
type Quantity struct {
	Name  string
	Unit  string // SI unit as written in the language, "" for a number
	Value float64
	Word  string // for a quantity that is a word, like a region of operation
}

// Operating is implemented by stamps that can tell their operating quantities.
type Operating interface {
	// Operating returns the quantities at e, which has been evaluated by this stamp alone
	// (so e.F[pin] is the current into that pin).
	Operating(e *Eval) []Quantity
}

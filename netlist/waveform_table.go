package netlist

import (
	"maps"
	"math"
	"slices"
	"sync"

	"poise/devices"
	"poise/mna"
	"poise/netlist/unit"
)

// waveArg is one argument of a waveform.
type waveArg struct {
	name     string
	kind     waveKind
	named    bool // must be written with its name
	optional bool
	initial  float64 // value if it is not written
}

type waveKind uint8

const (
	waveAmplitude waveKind = iota // V or A, with the waveform's own crest factor
	waveLevel                     // V or A
	waveDensity                   // V/rtHz or A/rtHz
	waveFrequency
	waveTime
	waveEdge // a positive time
	waveAngle
	waveShare
	waveWhole
)

// dimension returns what an argument is in; not for amplitudes, levels and densities, which are of a voltage or a current.
func (k waveKind) dimension() unit.Dimension {
	switch k {
	case waveFrequency:
		return unit.Frequency
	case waveTime, waveEdge:
		return unit.Time
	}
	return unit.Number
}

// waveform describes a call. crest is the peak over the root mean square; 0: no such value is defined.
type waveform struct {
	args  []waveArg
	crest float64
	build func(a map[string]float64) (mna.Signal, error)
}

// positional is an argument that needs no name.
func positional(name string, kind waveKind) waveArg { return waveArg{name: name, kind: kind} }

// named is an argument that is written with its name.
func named(name string, kind waveKind) waveArg { return waveArg{name: name, kind: kind, named: true} }

// optionalArg is one that may be left out, too.
func optionalArg(name string, kind waveKind, initial float64) waveArg {
	return waveArg{name: name, kind: kind, named: true, optional: true, initial: initial}
}

// waveforms returns the calls of the language. points and samples, whose arguments are a list and a file, are built apart.
var waveforms = sync.OnceValue(func() map[string]waveform {
	amplitude, frequency := positional("amplitude", waveAmplitude), positional("frequency", waveFrequency)
	phase := optionalArg("phase", waveAngle, 0)
	return map[string]waveform{
		"sine": {[]waveArg{amplitude, frequency, phase, optionalArg("delay", waveTime, 0)}, math.Sqrt2, func(a map[string]float64) (mna.Signal, error) {
			return devices.Sine{Peak: a["amplitude"], Frequency: a["frequency"], Phase: a["phase"], Delay: a["delay"]}.New()
		}},
		"triangle": {[]waveArg{amplitude, frequency, phase, optionalArg("skew", waveShare, 0.5)}, math.Sqrt(3), func(a map[string]float64) (mna.Signal, error) {
			return devices.Triangle{Peak: a["amplitude"], Frequency: a["frequency"], Phase: a["phase"], Skew: a["skew"]}.New()
		}},
		"square": {[]waveArg{amplitude, frequency, phase, optionalArg("duty", waveShare, 0.5), optionalArg("edge", waveEdge, 0)}, 1, func(a map[string]float64) (mna.Signal, error) {
			return devices.Square{Peak: a["amplitude"], Frequency: a["frequency"], Phase: a["phase"], Duty: a["duty"], Edge: a["edge"]}.New()
		}},
		"step": {[]waveArg{positional("from", waveLevel), positional("to", waveLevel), optionalArg("at", waveTime, 0), optionalArg("edge", waveEdge, 0)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Step{From: a["from"], To: a["to"], Start: a["at"], Edge: a["edge"]}.New()
		}},
		"ramp": {[]waveArg{positional("from", waveLevel), positional("to", waveLevel), optionalArg("at", waveTime, 0), named("over", waveTime)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Ramp{From: a["from"], To: a["to"], Start: a["at"], Over: a["over"]}.New()
		}},
		"pulse": {[]waveArg{positional("low", waveLevel), positional("high", waveLevel), optionalArg("at", waveTime, 0), named("width", waveTime), optionalArg("edge", waveEdge, 0), optionalArg("every", waveTime, 0)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Pulse{Low: a["low"], High: a["high"], Start: a["at"], Width: a["width"], Edge: a["edge"], Every: a["every"]}.New()
		}},
		"modulated": {[]waveArg{amplitude, frequency, named("tone", waveFrequency), optionalArg("depth", waveShare, 0.8)}, math.Sqrt2, func(a map[string]float64) (mna.Signal, error) {
			return devices.Modulated{Peak: a["amplitude"], Carrier: a["frequency"], Tone: a["tone"], Depth: a["depth"]}.New()
		}},
		"surge": {[]waveArg{amplitude, named("front", waveTime), named("tail", waveTime), optionalArg("at", waveTime, 0)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Surge{Peak: a["amplitude"], Front: a["front"], Tail: a["tail"], Start: a["at"]}.New()
		}},
		"ringing": {[]waveArg{amplitude, frequency, named("decay", waveTime), optionalArg("at", waveTime, 0)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Ringing{Peak: a["amplitude"], Frequency: a["frequency"], Decay: a["decay"], Start: a["at"]}.New()
		}},
		"bursts": {[]waveArg{amplitude, named("front", waveTime), named("tail", waveTime), named("rate", waveFrequency), named("length", waveTime), named("every", waveTime)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Bursts{Peak: a["amplitude"], Front: a["front"], Tail: a["tail"], Rate: a["rate"], Length: a["length"], Every: a["every"]}.New()
		}},
		"hiss": {[]waveArg{positional("density", waveDensity), named("band", waveFrequency), optionalArg("seed", waveWhole, 1)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Hiss{Density: a["density"], Band: a["band"], Seed: uint64(a["seed"])}.New()
		}},
		"chirp": {[]waveArg{amplitude, named("from", waveFrequency), named("to", waveFrequency), named("over", waveTime)}, math.Sqrt2, func(a map[string]float64) (mna.Signal, error) {
			return devices.Chirp{Peak: a["amplitude"], From: a["from"], To: a["to"], Over: a["over"]}.New()
		}},
		"points": {}, "samples": {},
	}
})

func isWaveformName(name string) bool {
	_, ok := waveforms()[name]
	return ok
}

// waveformNames lists the waveforms of the language, sorted.
func waveformNames() []string { return slices.Sorted(maps.Keys(waveforms())) }

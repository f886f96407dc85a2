package netlist

import "poise/netlist/syntax"

// Codes of the problems that the loader reports, besides those of package syntax. They are stable: a code keeps its meaning.
const (
	CodeUnknown    syntax.Code = "P201" // no such name
	CodeDuplicate  syntax.Code = "P202" // a name given twice
	CodeDimension  syntax.Code = "P203" // the wrong kind of quantity
	CodeCycle      syntax.Code = "P204" // a value or part that depends on itself
	CodeLiteral    syntax.Code = "P205" // not a number with a unit
	CodeRange      syntax.Code = "P206" // outside the physical or sensible range
	CodeArguments  syntax.Code = "P207" // wrong arguments
	CodeUnitName   syntax.Code = "P208" // a unit as the name of a value
	CodeAmplitude  syntax.Code = "P209" // an amplitude unit outside a waveform
	CodeNotValue   syntax.Code = "P210" // not a value
	CodeFamily     syntax.Code = "P211" // no such family, part or block
	CodeParameter  syntax.Code = "P212" // no such parameter
	CodePin        syntax.Code = "P213" // no such pin
	CodeMissingPin syntax.Code = "P214" // a pin left unconnected
	CodeRecursion  syntax.Code = "P215" // a block that contains itself
	CodeModifier   syntax.Code = "P216" // a modifier that does not belong here
	CodeFile       syntax.Code = "P217" // a file that cannot be read
	CodeNoDesign   syntax.Code = "P218" // no design line
	CodeLimit      syntax.Code = "P219" // more than the loader allows
	CodeMatch      syntax.Code = "P220" // parts that cannot match
	CodeNoCircuit  syntax.Code = "P221" // no circuit

	CodeSingle   syntax.Code = "P230" // a node with a single connection
	CodeFloating syntax.Code = "P231" // a node without a path for direct current to gnd
	CodeLoop     syntax.Code = "P232" // a loop of voltage sources and inductors
	CodeCut      syntax.Code = "P233" // a cut of current sources and capacitors

	CodeNeedsRun   syntax.Code = "P240" // a waveform without a run
	CodeNeedsBand  syntax.Code = "P241" // a response metric without a frequency
	CodeEmptyRange syntax.Code = "P242" // an empty or reversed range
	CodeShapes     syntax.Code = "P243" // waveforms and curves in one expression
	CodeComparison syntax.Code = "P244" // a comparison that makes no sense
	CodePort       syntax.Code = "P245" // no port, or several without saying which
	CodeBench      syntax.Code = "P246" // a statement that does not fit its bench
	CodeLater      syntax.Code = "P250" // part of the language, not of this version

	CodeUnused    syntax.Code = "P301" // a warning: a part, let or block that nothing uses
	CodeMagnitude syntax.Code = "P302" // a warning: a value of an unlikely size
	CodeNothing   syntax.Code = "P303" // a warning: a bench that expects and plots nothing
	CodeShort     syntax.Code = "P304" // a warning: a part whose ends are one node
)

// CodeInfo describes a code. In the example the problem's place is marked with « before it.
type CodeInfo struct {
	Code    syntax.Code
	Meaning string
	Example string
}

// circuitOf wraps an example's lines to a file that is otherwise in order.
func circuitOf(lines string) string {
	return "design d\nrail vp = 9V\nvp -- R1 1kohm -- gnd\n" + lines
}

// Codes returns every code with an example that gives it, in order.
func Codes() []CodeInfo {
	return []CodeInfo{
		{syntax.CodeUnexpected, "something else is wanted here", circuitOf("vp -- R2 1kohm «gnd\n")},
		{syntax.CodeBadCharacter, "a character that is no part of the language", circuitOf("let x = 3 «$ 4\n")},
		{syntax.CodeOpenString, "a text that is not closed in its line", "design d «\"title\nrail vp = 9V\nvp -- R1 1kohm -- gnd\n"},
		{syntax.CodeReserved, "a word of the language where a name is wanted", circuitOf("let «rail = 3\n")},
		{syntax.CodeTooDeep, "nested too deeply", ""},
		{syntax.CodeTooLarge, "the file is larger than the loader allows", ""},
		{syntax.CodeOpenBrace, "a brace that is not closed", circuitOf("bench b «{\n  expect volts(vp) >= 1V\n")},
		{syntax.CodeStrayBrace, "a brace that closes nothing", circuitOf("«}\n")},
		{syntax.CodeNotText, "the file is not a text in UTF-8", "«\xff\xfe"},
		{syntax.CodeMisplaced, "a statement that does not belong here", circuitOf("«run 1s\n")},
		{CodeUnknown, "there is nothing of this name", circuitOf("vp -- R2 «Rx -- gnd\n")},
		{CodeDuplicate, "a name is given twice", circuitOf("vp -- «R1 2kohm -- gnd\n")},
		{CodeDimension, "the wrong kind of quantity", circuitOf("let x = 3V «+ 2A\n")},
		{CodeCycle, "a value or a part depends on itself", circuitOf("let x = y\nlet y = «x\n")},
		{CodeLiteral, "not a number with a unit of the language", circuitOf("vp -- R2 «1Kohm -- gnd\n")},
		{CodeRange, "outside the physical or sensible range", circuitOf("vp -- R2 «0ohm -- gnd\n")},
		{CodeArguments, "wrong arguments", circuitOf("vp -- R2 «e24() -- gnd\n")},
		{CodeUnitName, "a unit cannot be the name of a value", circuitOf("let «ms = 3\n")},
		{CodeAmplitude, "an amplitude unit outside a waveform", circuitOf("vp -- V1 «3Vpp -- x -- R2 1kohm -- gnd\n")},
		{CodeNotValue, "not a value that is known beforehand", circuitOf("let x = «sine(1V, 50Hz)\n")},
		{CodeFamily, "no family, part or block of this name", circuitOf("part p = «triode { Is = 1fA }\nvp -- D1 p -- gnd\n")},
		{CodeParameter, "no parameter of this name", circuitOf("part p = diode { «Iz = 1fA }\nvp -- D1 p -- gnd\n")},
		{CodePin, "no pin of this name", circuitOf("part p = npn\nQ1 = p(«base: vp, b: vp, c: vp, e: gnd)\n")},
		{CodeMissingPin, "a pin is left unconnected", circuitOf("part p = npn\n«Q1 = p(b: vp, e: gnd)\n")},
		{CodeRecursion, "a block contains itself", circuitOf("block k(a) {\n  X = «k(a: a)\n}\nY = k(a: vp)\n")},
		{CodeModifier, "a modifier that does not belong here", circuitOf("vp -- R2 1kohm «start 1V -- gnd\n")},
		{CodeFile, "a file cannot be read", circuitOf("use «\"nowhere.poise\"\n")},
		{CodeNoDesign, "the file does not say what it is", "«rail vp = 9V\nvp -- R1 1kohm -- gnd\n"},
		{CodeLimit, "more than the loader allows", ""},
		{CodeMatch, "parts that cannot match", circuitOf("vp -- C1 1nF -- gnd\nmatch R1 «C1 within 1%\n")},
		{CodeNoCircuit, "the file describes no circuit", "«design d\n"},
		{CodeSingle, "a node has a single connection", circuitOf("vp -- R2 1kohm -- «x\n")},
		{CodeFloating, "a node has no path for direct current to gnd", circuitOf("vp -- C1 1nF -- «x -- C2 1nF -- gnd\n")},
		{CodeLoop, "voltage sources and inductors form a loop", circuitOf("vp -- «V1 5V -- gnd\n")},
		{CodeCut, "current sources and capacitors cut a node off", circuitOf("vp -- I1 1mA -- «x -- C1 1nF -- gnd\n")},
		{CodeNeedsRun, "a waveform needs a bench with a run", circuitOf("bench b {\n  expect «peak(volts(vp)) >= 1V\n}\n")},
		{CodeNeedsBand, "a response metric needs a frequency", circuitOf("a -- R2 1kohm -- gnd\nb -- R3 1kohm -- gnd\ninput i = (a, b)\noutput o = (vp)\nbench b {\n  expect «cmrr >= 3\n}\n")},
		{CodeEmptyRange, "an empty or reversed range", circuitOf("bench b {\n  expect volts(vp) within «10V..8V\n}\n")},
		{CodeShapes, "waveforms and curves do not mix", circuitOf("a -- R2 1kohm -- gnd\ninput i = (a)\noutput o = (vp)\nbench b {\n  run 1ms\n  expect «volts(a) / abs(gain(i.signal, volts(a)) over 1Hz..10Hz) <= 1V\n}\n")},
		{CodeComparison, "a comparison that makes no sense", circuitOf("bench b {\n  expect volts(vp) «= 9V\n}\n")},
		{CodePort, "no port, or several without saying which", circuitOf("bench b {\n  expect «cmrr at 50Hz >= 3\n}\n")},
		{CodeBench, "a statement does not fit its bench", circuitOf("bench b {\n  run 1ms\n  «run 2ms\n  expect volts(vp) >= 1V\n}\n")},
		{CodeLater, "part of the language, not of this version", circuitOf("bench b {\n  «spread 100\n  expect volts(vp) >= 1V\n}\n")},
		{CodeUnused, "a warning: nothing uses this part, let or block", circuitOf("let «x = 3\n")},
		{CodeMagnitude, "a warning: a value of an unlikely size", circuitOf("vp -- R2 «10mohm -- gnd\n")},
		{CodeNothing, "a warning: a bench that expects and plots nothing", circuitOf("bench «b {\n}\n")},
		{CodeShort, "a warning: both ends of a part are at one node", circuitOf("vp -- «R2 1kohm -- vp\n")},
	}
}

package syntax

import "strings"

// Codes of the errors that this package reports. They are stable: a code keeps its meaning.
const (
	CodeUnexpected   Code = "P101" // something else is wanted here
	CodeBadCharacter Code = "P102" // a character that is no part of the language
	CodeOpenString   Code = "P103" // a text that is not closed
	CodeReserved     Code = "P104" // a word of the language where a name is wanted
	CodeTooDeep      Code = "P105" // nested too deeply
	CodeTooLarge     Code = "P106" // the file is larger than the loader allows
	CodeOpenBrace    Code = "P107" // a brace that is not closed
	CodeStrayBrace   Code = "P108" // a brace that closes nothing
	CodeNotText      Code = "P109" // the file is not UTF-8
	CodeMisplaced    Code = "P110" // a statement that does not belong here
)

// CodeInfo describes a code with an example of it.
type CodeInfo struct {
	Code    Code
	Meaning string
	Example string // a text with the error behind the mark «, which is no part of it; without a mark the error has no place
	Limits  Limits // under which the example is an error
	Bench   bool   // the example is the inside of a bench, for ParseStatements
}

// Codes returns every code of this package, in order.
func Codes() []CodeInfo {
	return []CodeInfo{
		{Code: CodeUnexpected, Meaning: "something else is wanted here", Example: "vp -- R1 1kohm «gnd\n"},
		{Code: CodeBadCharacter, Meaning: "a character that is no part of the language", Example: "let x = 3 «$ 4\n"},
		{Code: CodeOpenString, Meaning: "a text is not closed in its line", Example: "design d «\"title\nrail vp = 9V\n"},
		{Code: CodeReserved, Meaning: "a word of the language stands where a name is wanted", Example: "let «rail = 3\n"},
		{Code: CodeTooDeep, Meaning: "nested too deeply", Example: "let x = " + strings.Repeat("(", maxNesting) + "«(3V\n"},
		{Code: CodeTooLarge, Meaning: "the text is larger than is allowed", Example: "rail vp = 9V\n", Limits: Limits{Bytes: 10}},
		{Code: CodeOpenBrace, Meaning: "a brace is not closed", Example: "bench b «{\n  expect volts(vp) >= 1V\n"},
		{Code: CodeStrayBrace, Meaning: "a brace closes nothing", Example: "rail vp = 9V\n«}\n"},
		{Code: CodeNotText, Meaning: "the file is not a text in UTF-8", Example: "\xff\xfe"},
		{Code: CodeMisplaced, Meaning: "a statement does not belong here", Example: "set Rd = 1kohm\n«rail vp = 9V\n", Bench: true},
	}
}

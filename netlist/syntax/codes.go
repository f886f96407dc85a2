package syntax

// Codes of the errors that the parser reports. Their meaning and an example of each stand in the table of codes of package netlist.
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

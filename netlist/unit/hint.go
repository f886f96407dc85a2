package unit

import (
	"strings"
	"unicode/utf8"
)

// unitHint guesses what was meant by what is not a unit: a word or the wrong case, with or without a prefix.
func unitHint(text string) string {
	if trimmed := strings.TrimSpace(text); trimmed != text {
		return "a unit follows its number without a blank"
	}
	letter, size := utf8.DecodeRuneInString(text)
	if _, ok := prefix(letter); ok && size == len(text) {
		return "a prefix needs a unit behind it, as in 1" + text + "V"
	}
	if meant := meantUnit(text); meant != "" {
		return "did you mean " + meant + "?"
	}
	for _, word := range prefixWords() {
		tail, ok := cutFold(text, word.long)
		if !ok {
			continue
		}
		if s, known := lookUp(orMeant(tail)); known && s.prefixes {
			return "did you mean " + word.letter + s.name + "?"
		}
	}
	return ""
}

// prefixWords are the ways in which people write prefixes, the exact letters first.
func prefixWords() []struct{ long, letter string } {
	return []struct{ long, letter string }{
		{"f", "f"}, {"p", "p"}, {"n", "n"}, {"u", "u"}, {"µ", "u"}, {"m", "m"}, {"k", "k"}, {"M", "M"}, {"G", "G"}, {"T", "T"},
		{"K", "k"}, {"U", "u"}, {"N", "n"}, {"P", "p"}, {"g", "G"}, {"t", "T"},
		{"femto", "f"}, {"pico", "p"}, {"nano", "n"}, {"micro", "u"}, {"mc", "u"}, {"milli", "m"}, {"kilo", "k"}, {"mega", "M"}, {"meg", "M"},
		{"giga", "G"}, {"tera", "T"},
	}
}

// cutFold cuts a prefix off: a letter in its own case, a word in any.
func cutFold(text, start string) (string, bool) {
	if utf8.RuneCountInString(start) == 1 {
		return strings.CutPrefix(text, start)
	}
	if len(text) < len(start) || !strings.EqualFold(text[:len(start)], start) {
		return "", false
	}
	return text[len(start):], true
}

func orMeant(text string) string {
	if meant := meantUnit(text); meant != "" {
		return meant
	}
	return text
}

// meantUnit returns the unit for a word or for a symbol in the wrong case, "" if none comes to mind.
func meantUnit(text string) string {
	switch lower := strings.ToLower(text); strings.TrimSuffix(lower, "s") {
	case "ohm":
		return "ohm"
	case "v", "volt":
		return "V"
	case "a", "amp", "ampere":
		return "A"
	case "siemen", "mho":
		return "S"
	case "f", "farad":
		return "F"
	case "h", "henry", "henrie":
		return "H"
	case "sec", "second":
		return "s"
	case "hz", "hertz":
		return "Hz"
	case "w", "watt":
		return "W"
	case "j", "joule":
		return "J"
	case "coulomb":
		return "C"
	case "k", "kelvin":
		return "K"
	case "celsiu", "degree":
		return "degC"
	case "db":
		return "dB"
	case "percent", "pct":
		return "%"
	default:
		return otherCase(lower)
	}
}

// otherCase returns the one unit that differs from a text in lower case only by its case.
func otherCase(lower string) string {
	found := ""
	for _, s := range symbols() {
		if strings.ToLower(s.name) == lower {
			if found != "" {
				return ""
			}
			found = s.name
		}
	}
	return found
}

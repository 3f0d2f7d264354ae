package binning

import (
	"fmt"
	"math/big"
	"slices"
	"strings"

	"epitally/analytics/quantity"
)

// atom is one comparison: the value of a quantity lies beyond a cut, or not.
type atom struct {
	quantity string
	cut      cut
	beyond   bool
}

// A term is a conjunction of atoms; a condition is a disjunction of terms.
type term []atom

// Limits of one condition: nesting, and terms after multiplying out.
const (
	maxDepth = 32
	maxTerms = 256
)

// conditionError is a fault inside a condition, at a byte offset of its text.
type conditionError struct {
	offset  int
	problem string
	remedy  string
}

func (e *conditionError) Error() string { return e.problem }

// parseCondition reads
//
//	condition  = all { "or" all }
//	all        = test { "and" test }
//	test       = "(" condition ")" | quantity comparison
//	comparison = ( "<" | "<=" | ">" | ">=" | "==" | "!=" ) number
//	           | ( "between" | "outside" ) "[" number "," number "]"
func parseCondition(text string) ([]term, *conditionError) {
	p := &conditionParser{text: text}
	p.next()
	terms := p.condition(0)
	if p.err == nil && p.token != "" {
		p.fail("unexpected %q", p.token)
		p.err.remedy = `join comparisons with "and" or "or"`
	}
	if p.err != nil {
		return nil, p.err
	}
	return terms, nil
}

type conditionParser struct {
	text  string
	token string // the token being looked at; "" at the end
	at    int    // its offset
	after int    // offset behind it
	err   *conditionError
}

func (p *conditionParser) fail(format string, args ...any) {
	if p.err == nil {
		p.err = &conditionError{offset: p.at, problem: fmt.Sprintf(format, args...)}
	}
	p.token = ""
}

func (p *conditionParser) next() {
	if p.err != nil {
		return
	}
	rest := strings.TrimLeft(p.text[p.after:], " \t\r\n")
	p.at = len(p.text) - len(rest)
	n := 0
	switch {
	case rest == "":
	case strings.ContainsRune("()[],", rune(rest[0])):
		n = 1
	case strings.ContainsRune("<>=!", rune(rest[0])):
		for n < len(rest) && strings.ContainsRune("<>=!", rune(rest[n])) {
			n++
		}
	default:
		for n < len(rest) && !strings.ContainsRune(" \t\r\n()[],<>=!", rune(rest[n])) {
			n++
		}
	}
	p.token, p.after = rest[:n], p.at+n
}

// take moves past the token when it is the one wanted.
func (p *conditionParser) take(token string) bool {
	if p.err != nil || p.token != token {
		return false
	}
	p.next()
	return true
}

func (p *conditionParser) expect(token string) {
	if !p.take(token) {
		p.fail("expected %q%s", token, p.found())
	}
}

func (p *conditionParser) found() string {
	if p.token == "" {
		return " at the end"
	}
	return fmt.Sprintf(", found %q", p.token)
}

func (p *conditionParser) condition(depth int) []term {
	terms := p.all(depth)
	for p.take("or") {
		terms = append(terms, p.all(depth)...)
		p.limit(terms)
	}
	return terms
}

func (p *conditionParser) all(depth int) []term {
	terms := p.test(depth)
	for p.take("and") {
		right := p.test(depth)
		if len(terms)*len(right) > maxTerms {
			p.limit(make([]term, maxTerms+1))
			return nil
		}
		var product []term
		for _, a := range terms {
			for _, b := range right {
				product = append(product, slices.Concat(a, b))
			}
		}
		terms = product
	}
	return terms
}

func (p *conditionParser) limit(terms []term) {
	if len(terms) > maxTerms {
		p.fail("the condition has more than %d alternatives", maxTerms)
	}
}

func (p *conditionParser) test(depth int) []term {
	if p.token == "(" && depth >= maxDepth {
		p.fail("parentheses are nested more than %d deep", maxDepth)
	}
	if p.take("(") {
		terms := p.condition(depth + 1)
		p.expect(")")
		return terms
	}
	name := p.token
	if p.err != nil {
		return nil
	}
	if name == "and" || name == "or" || !quantity.ValidName(name) {
		p.fail("expected a quantity%s", p.found())
		p.err.remedy = "write a comparison like forward_voltage_v > 4.5"
		return nil
	}
	p.next()
	return p.comparison(name)
}

func (p *conditionParser) comparison(name string) []term {
	op := p.token
	at := func(value *big.Rat, after, beyond bool) atom { return atom{name, cut{value, after}, beyond} }
	switch op {
	case "<", "<=", ">", ">=", "==", "!=":
		p.next()
		v := p.number()
		switch op {
		case "<":
			return []term{{at(v, false, false)}}
		case "<=":
			return []term{{at(v, true, false)}}
		case ">":
			return []term{{at(v, true, true)}}
		case ">=":
			return []term{{at(v, false, true)}}
		case "==":
			return []term{{at(v, false, true), at(v, true, false)}}
		}
		return []term{{at(v, false, false)}, {at(v, true, true)}}
	case "between", "outside":
		p.next()
		low, high := p.interval()
		if op == "between" {
			return []term{{at(low, false, true), at(high, true, false)}}
		}
		return []term{{at(low, false, false)}, {at(high, true, true)}}
	}
	p.fail("expected a comparison after %s%s", name, p.found())
	if p.err.remedy == "" {
		p.err.remedy = "use <, <=, >, >=, ==, !=, between [a, b] or outside [a, b]"
	}
	return nil
}

func (p *conditionParser) interval() (low, high *big.Rat) {
	p.expect("[")
	low = p.number()
	p.expect(",")
	start := p.at
	high = p.number()
	if p.err == nil && low.Cmp(high) > 0 {
		p.at = start
		p.fail("the interval ends below its start")
	}
	p.expect("]")
	return low, high
}

func (p *conditionParser) number() *big.Rat {
	v, ok := parseDecimal(p.token)
	if !ok {
		p.fail("expected a decimal number%s", p.found())
		return new(big.Rat)
	}
	p.next()
	return v
}

// parseDecimal reads a decimal number exactly: digits with an optional sign,
// point and power of ten, at most 30 characters, the power within ±30.
func parseDecimal(text string) (*big.Rat, bool) {
	mantissa, power, hasPower := strings.Cut(strings.ToLower(text), "e")
	digits := strings.TrimLeft(mantissa, "+-")
	if len(text) > 30 || len(mantissa)-len(digits) > 1 || strings.Trim(digits, "0123456789.") != "" ||
		strings.Count(digits, ".") > 1 || strings.Trim(digits, ".") == "" {
		return nil, false
	}
	if hasPower {
		d := strings.TrimLeft(power, "+-")
		if d == "" || len(power)-len(d) > 1 || len(d) > 2 || strings.Trim(d, "0123456789") != "" || d > "30" && len(d) == 2 {
			return nil, false
		}
	}
	return new(big.Rat).SetString(text)
}

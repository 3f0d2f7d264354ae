package web

// SpecsSentence tells what specifications there are: their number, and for the
// one that binned the most wafers lately its yield over them. name "" = none has
// binned any.
func SpecsSentence(n int, name, href string, yield float64, wafers int) Sentence {
	var s Sentence
	switch {
	case n == 0:
		s.stress("No specification is stored yet", "")
		s.say(", so no die can be put into a bin.")
		return s
	case name == "":
		s.stress(Plural(n, "specification", "specifications"), "")
		s.say(" stored; how wafers yield cannot be told, since none has been binned.")
		return s
	}
	s.stress(Plural(n, "specification", "specifications"), "")
	s.say(" stored; under ")
	s.Parts = append(s.Parts, Part{Text: name, Em: true, Href: href})
	s.say(" the last ")
	s.say(Plural(wafers, "wafer", "wafers"))
	s.say(" yielded ")
	s.stress(PercentOf(yield), href)
	s.say(" of their dies.")
	return s
}

// SpecSentence tells how wafers yielded under one specification. stored says
// whether the version shown is the one that the yields are of.
func SpecSentence(title string, yields []WaferYield, latest bool) Sentence {
	var s Sentence
	good, all, wafers := 0, 0, 0
	low, high := -1, -1
	for i, y := range yields {
		if y.Denominator == 0 {
			continue
		}
		good, all, wafers = good+y.Good, all+y.Denominator, wafers+1
		share := func(k int) float64 { return float64(yields[k].Good) / float64(yields[k].Denominator) }
		if low < 0 || share(i) < share(low) {
			low = i
		}
		if high < 0 || share(i) > share(high) {
			high = i
		}
	}
	s.say("Under ")
	s.Parts = append(s.Parts, Part{Text: title, Em: true})
	switch {
	case !latest:
		s.say(", an older version, yields are no longer kept; a wafer's page bins it anew under this version.")
		return s
	case wafers == 0:
		s.say(" how wafers yield cannot be told, since none has been binned.")
		return s
	}
	s.say(" the last " + Plural(wafers, "wafer", "wafers") + " yielded ")
	s.stress(Percent(good, all), "")
	s.say(" of " + Count(all) + " dies")
	if wafers > 1 {
		link := func(i int) {
			y := yields[i]
			s.Parts = append(s.Parts, Part{Text: y.Wafer, Href: waferHref(y.Wafer)})
			s.say(" with " + Percent(y.Good, y.Denominator))
		}
		s.say(", from ")
		link(low)
		s.say(" to ")
		link(high)
	}
	s.say(".")
	return s
}

// LoadSentence tells what became of one source.
func LoadSentence(name, state string, wafers int, dies int64) Sentence {
	var s Sentence
	s.stress(name, "")
	switch state {
	case "stored":
		s.say(" is stored")
		if wafers > 0 {
			s.say(": " + Plural(wafers, "wafer", "wafers") + " with " + Count(dies) + " dies")
		}
	case "refused":
		s.say(" was refused; nothing of it is stored")
	case "reading":
		s.say(" is being read")
	default:
		s.say(" waits to be read")
	}
	s.say(".")
	return s
}

package web

// LoadsPage lists the sources, newest first.
type LoadsPage struct {
	Base
	States   []Fact // links that filter by state; the one shown has no link
	Rows     []LoadLine
	OlderURL string
	FirstURL string
	Empty    bool // nothing was ever loaded
}

// LoadLine is one source.
type LoadLine struct {
	Name, Href string
	State      string
	Format     string
	SeenAt     string
	Bytes      string
	Wafers     string
	Dies       string
	Reason     string
	Place      string // "line 17, column 4"
	Notices    int
}

// LoadPage shows one source.
type LoadPage struct {
	Base
	Name    string
	State   string
	Facts   []Fact
	Reason  string
	Place   string
	Notices []string
}

// LoadsFound is what the first sentence of the loads list rests on.
type LoadsFound struct {
	Refused     int    // sources refused in the last hour
	Stored      int    // sources stored in the last hour
	SharedCause string // the reason that most of the refused share; "" = none
	Sharing     int    // how many share it
	Ever        bool   // something was loaded once
	RefusedURL  string
	StoredURL   string
	Basis       string
}

// LoadsSentence tells how loading went in the last hour.
func LoadsSentence(f LoadsFound) Sentence {
	s := Sentence{Basis: f.Basis}
	switch {
	case !f.Ever:
		s.stress("Nothing has been loaded yet", "")
		s.say(".")
		return s
	case f.Refused == 0 && f.Stored == 0:
		s.say("Nothing arrived in the last hour; ")
		s.Parts = append(s.Parts, Part{Text: "the loads before it", Href: f.StoredURL})
		s.say(" are below.")
		return s
	case f.Refused == 0:
		s.stress(Plural(f.Stored, "file", "files"), f.StoredURL)
		s.say(was(f.Stored) + "stored in the last hour, and none refused.")
		return s
	}
	s.stress(Plural(f.Refused, "file", "files"), f.RefusedURL)
	s.say(was(f.Refused) + "refused in the last hour")
	switch {
	case f.Sharing > 1 && f.Sharing == f.Refused:
		s.say("; all share one cause: " + f.SharedCause)
	case f.Sharing > 1:
		s.say("; " + Count(f.Sharing) + " share one cause: " + f.SharedCause)
	case f.SharedCause != "":
		s.say(": " + f.SharedCause)
	}
	if f.Stored > 0 {
		s.say("; ")
		s.Parts = append(s.Parts, Part{Text: Plural(f.Stored, "was", "were") + " stored", Href: f.StoredURL})
	}
	s.say(".")
	return s
}

func was(n int) string {
	if n == 1 {
		return " was "
	}
	return " were "
}

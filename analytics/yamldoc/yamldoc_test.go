package yamldoc

import (
	"errors"
	"slices"
	"strings"
	"testing"
	"time"

	"epitally/analytics"
)

func parsed(t *testing.T, document string, form Form) Node {
	t.Helper()
	n, err := Parse([]byte(document), form)
	if err != nil {
		t.Fatalf("%q: %v", document, err)
	}
	return n
}

// refused holds that err is a fault at its place, with the beginning of its text.
func refused(t *testing.T, name string, err error, want string) {
	t.Helper()
	var f *analytics.Fault
	if !errors.As(err, &f) || !strings.HasPrefix(err.Error(), want) {
		t.Errorf("%s:\n  %v\nwant\n  %s", name, err, want)
	}
}

func TestParseRefusesWhatIsNoDocument(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ name, document, want string }{
		{"empty", "# remark\n", "line 1: the document is empty"},
		{"two", "a: b\n---\na: b\n", "line 1: 2 documents where one is expected; keep one"},
		{"not YAML", "axes: [", "line 1, column 7: not YAML"},
		{"brackets", strings.Repeat("[", MaxBytes), "line 1, column 65: lists and mappings nest over 64 deep"},
		{"braces", "a:\n  " + strings.Repeat("{a: ", 70), "line 2, column 259: lists and mappings nest over 64 deep"},
		{"dashes", strings.Repeat("- ", MaxBytes/2), "line 1, column 129: lists and mappings nest over 64 deep"},
		{"too large", strings.Repeat("#", MaxBytes+1), "the document is over 1048576 bytes"},
	} {
		began := time.Now()
		_, err := Parse([]byte(c.document), Form{Remedy: "keep one"})
		refused(t, c.name, err, c.want)
		// The parser would need minutes; the generous bound is for a busy machine.
		if took := time.Since(began); took > 20*time.Second {
			t.Errorf("%s: %v", c.name, took)
		}
	}
}

func TestParseReadsBracketsThatAreText(t *testing.T) {
	t.Parallel()
	n := parsed(t, "\xef\xbb\xbfnames: ["+strings.Repeat(`"[1, 2)", `, 100)+"]\n", Form{})
	f, err := n.Fields("names!")
	if err != nil {
		t.Fatal(err)
	}
	if texts, err := f["names"].Texts(100); err != nil || len(texts) != 100 || texts[99] != "[1, 2)" {
		t.Errorf("%q, %v", texts, err)
	}
}

func TestFieldsSayWhere(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ name, document, atSign, atKey string }{
		{"list", "- a", "line 1, column 1: expected keys", "line 1, column 1: expected keys"},
		{"unknown", "name: a\ncolour: red", `line 2, column 9: colour: unknown key "colour"; use name, size`, `line 2, column 1: colour: unknown key "colour"; use name, size`},
		{"missing", "size: 2", `line 1, column 5: the key "name" is missing`, `line 1, column 1: the key "name" is missing`},
		{"twice", "name: a\nname: a", `line 2, column 1: name: the key "name" stands twice`, `line 2, column 1: name: the key "name" stands twice`},
		{"no value", "name:\nsize: 2", `line 1, column 1: name: "name" has no value; write a value`, `line 1, column 1: name: "name" has no value; write a value`},
	} {
		for atKeys, want := range map[bool]string{false: c.atSign, true: c.atKey} {
			_, err := parsed(t, c.document, Form{AtKeys: atKeys}).Fields("name!", "size")
			refused(t, c.name, err, want)
		}
	}
}

func TestEntriesKeepTheirOrder(t *testing.T) {
	t.Parallel()
	list, err := parsed(t, "b: 1\na: {c: 2}\n", Form{}).Entries()
	if err != nil || len(list) != 2 || list[0].Name != "b" || list[1].Name != "a" || list[1].Value.Line() != 2 {
		t.Fatalf("%v, %v", list, err)
	}
	c, err := list[1].Value.Value("c")
	if err != nil {
		t.Fatal(err)
	}
	refused(t, "path", c.Wrap(analytics.ErrInvalid), "line 2, column 8: a.c: ")
	_, err = list[1].Value.Value("d")
	refused(t, "absent", err, `line 2, column 4: a: the key "d" is missing`)
	if absent := (Node{}); absent.Is() || absent.Line() != 0 {
		t.Error("the zero node is there")
	}
}

func TestScalars(t *testing.T) {
	t.Parallel()
	items, err := parsed(t, `[" text ", 2.5, 7, true, "", "a\ab", [x], null, '(']`, Form{}).Items(9)
	if err != nil {
		t.Fatal(err)
	}
	text, err := items[0].Text()
	scalar, err2 := items[0].Scalar()
	if err != nil || err2 != nil || text != "text" || scalar != " text " {
		t.Errorf("%q, %q, %v, %v", text, scalar, err, err2)
	}
	if v, err := items[1].Number(); err != nil || v != 2.5 {
		t.Errorf("%g, %v", v, err)
	}
	if v, err := items[2].Whole(0, 7); err != nil || v != 7 {
		t.Errorf("%d, %v", v, err)
	}
	if v, err := items[3].Truth(); err != nil || !v {
		t.Errorf("%v, %v", v, err)
	}
	if v, err := items[6].Texts(1); err != nil || !slices.Equal(v, []string{"x"}) {
		t.Errorf("%q, %v", v, err)
	}
	for _, c := range []struct {
		name string
		read func() error
		want string
	}{
		{"long", func() error { _, err := items[0].TextWithin(3); return err }, "line 1, column 2: [1]: the text is over 3 bytes"},
		{"whole", func() error { _, err := items[2].Whole(0, 6); return err }, "line 1, column 17: [3]: expected a whole number from 0 to 6"},
		{"truth", func() error { _, err := items[2].Truth(); return err }, "line 1, column 17: [3]: expected true or false"},
		{"empty", func() error { _, err := items[4].Text(); return err }, "line 1, column 26: [5]: the text is empty"},
		{"control", func() error { _, err := items[5].Text(); return err }, "line 1, column 30: [6]: the text holds control characters"},
		{"list", func() error { _, err := items[6].Text(); return err }, "line 1, column 38: [7]: expected text"},
		{"number", func() error { _, err := items[7].Number(); return err }, "line 1, column 43: [8]: expected a number"},
		{"choice", func() error { _, err := items[0].Choice("a", "b"); return err }, `line 1, column 2: [1]: "text" is not known here; use a, b`},
		{"pattern", func() error { _, err := items[8].Pattern(); return err }, `line 1, column 49: [9]: "(" is not a regular expression`},
	} {
		refused(t, c.name, c.read(), c.want)
	}
	_, err = parsed(t, "[1, 2, 3]", Form{}).Items(2)
	refused(t, "many", err, "line 1, column 1: 3 entries where at most 2 are read")
}

// FuzzParse holds that no text stops or stalls the reading.
func FuzzParse(f *testing.F) {
	for _, s := range []string{"a: b", "- - -", "[[[", "&a *a", "!!map {a: b}", "a: |\n  b", "? a\n: b", "---\n...\n"} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, document []byte) {
		n, err := Parse(document, Form{})
		if err != nil {
			var fault *analytics.Fault
			if !errors.As(err, &fault) {
				t.Fatalf("no fault: %v", err)
			}
			return
		}
		list, _ := n.Entries()
		for _, e := range list {
			e.Value.Text()
			e.Value.Items(3)
		}
	})
}

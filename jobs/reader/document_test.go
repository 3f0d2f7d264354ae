package reader

import (
	"errors"
	"strings"
	"testing"

	"epitally/analytics"
)

func TestDocumentsAreToldByTheirFirstKey(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ name, text, kind, of string }{
		{"catalogue", smallCatalogue, "catalogue", "fab"},
		{"specification", "\n# remark\n---\nspecification: harbour\nkind: probe\n", "specification", "harbour"},
		{"byte order mark, line ends", "\xef\xbb\xbfspecification: 'harbour'\r\nkind: probe\r\n", "specification", "harbour"},
		{"bare key", "specification:\n  harbour\nkind: probe\n", "specification", "harbour"},
	} {
		h, err := readHeld(t.Context(), Input{Name: "d.yaml", R: strings.NewReader(c.text)})
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		if h.result.Format != c.kind || h.kind != c.kind || h.name != c.of || h.text != strings.TrimPrefix(c.text, "\xef\xbb\xbf") {
			t.Errorf("%s: format %q, kind %q, name %q, text %q", c.name, h.result.Format, h.kind, h.name, h.text)
		}
	}
	for _, text := range []string{"title: x\nspecification: y\n", "specifications: x\n", "# only a remark\n", "specification=1\n", " specification: x\n"} {
		if kind := documentKind([]byte(text)); kind != "" {
			t.Errorf("%q is told to be a %s", text, kind)
		}
	}
}

func TestDocumentFaults(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		name, text, want string
		kind             error
	}{
		{"too large", "specification: x\n" + strings.Repeat("# more\n", 1<<18), "the specification is over 1048576 bytes; split it into several", analytics.ErrTooLarge},
		{"NUL", "specification: x\nkind: p\x00\n", "line 2, column 8: a NUL byte stands in the text; save the file as UTF-8 text", analytics.ErrInvalid},
		{"not UTF-8", "specification: x\nkind: p\xff\n", "line 2, column 8: the text is not UTF-8; save the file as UTF-8 text", analytics.ErrInvalid},
		{"no name", "specification:\nkind: probe\n", "specification: expected text", analytics.ErrInvalid},
		{"bad catalogue", "catalogue: x\nprodukts: []\n", `produkts: unknown key "produkts"`, analytics.ErrInvalid},
		{"not YAML", "specification: [\n", "not YAML", analytics.ErrInvalid},
	} {
		h, err := readHeld(t.Context(), Input{Name: "d.yaml", R: strings.NewReader(c.text)})
		if err == nil || !strings.Contains(err.Error(), c.want) || !errors.Is(err, c.kind) || h.kind != "" {
			t.Errorf("%s: %v\nwant %s", c.name, err, c.want)
		}
	}
}

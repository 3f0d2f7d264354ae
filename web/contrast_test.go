package web

import (
	"os"
	"regexp"
	"strings"
	"testing"
)

// TestTextStandsOutFromItsGround reads the colours from the style sheet itself:
// 7:1 for text, 3:1 for lines that carry meaning.
func TestTextStandsOutFromItsGround(t *testing.T) {
	t.Parallel()
	css, err := os.ReadFile("styles/ground.css")
	if err != nil {
		t.Fatal(err)
	}
	blocks := regexp.MustCompile(`(?s)\{([^{}]*--paper[^{}]*)\}`).FindAllStringSubmatch(string(css), -1)
	if len(blocks) != 3 {
		t.Fatalf("%d grounds, want light, dark by system and dark by choice", len(blocks))
	}
	for i, b := range blocks {
		colours := map[string]RGB{}
		for _, m := range regexp.MustCompile(`--([a-z]+): #([0-9a-f]{6})`).FindAllStringSubmatch(b[1], -1) {
			colours[m[1]] = mustHex(m[2])
		}
		for name, want := range map[string]float64{"ink": 7, "quiet": 7, "link": 7, "accent": 3, "line": 3, "faint": 3} {
			if got := contrast(colours["paper"], colours[name]); got < want {
				t.Errorf("ground %d: %s on paper %.1f:1, want %.0f:1", i, name, got, want)
			}
		}
	}
	if strings.TrimSpace(blocks[1][1]) != strings.TrimSpace(blocks[2][1]) && squeeze(blocks[1][1]) != squeeze(blocks[2][1]) {
		t.Error("the dark ground by system and by choice differ")
	}
	p := NewPalettes()
	for name, pal := range map[string]Palette{"light": p.Light, "dark": p.Dark} {
		if got := contrast(mustHex(pal.Ink), mustHex(pal.Paper)); got < 7 {
			t.Errorf("map ink on %s paper %.1f:1", name, got)
		}
		if got := contrast(mustHex(pal.Hatch), mustHex(pal.Paper)); got < 3 {
			t.Errorf("hatch on %s paper %.1f:1", name, got)
		}
	}
}

func squeeze(s string) string { return strings.Join(strings.Fields(s), " ") }

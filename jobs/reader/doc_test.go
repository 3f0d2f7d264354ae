package reader

import (
	"os"
	"strings"
	"testing"
)

// example cuts an indented example out of the package comment.
func example(t *testing.T, first string) string {
	t.Helper()
	text, err := os.ReadFile("doc.go")
	if err != nil {
		t.Fatal(err)
	}
	_, after, found := strings.Cut(string(text), "//\t"+first)
	if !found {
		t.Fatalf("doc.go has no example that begins %q", first)
	}
	body, _, _ := strings.Cut(first+after, "\n//\n")
	body, _, _ = strings.Cut(body, "\npackage ")
	return strings.ReplaceAll(body, "\n//\t", "\n") + "\n"
}

func TestExamplesOfThePackageCommentAreRead(t *testing.T) {
	t.Parallel()
	got, _, err := readAll(t, Input{}, example(t, "# epitally: die readings"))
	if err != nil || len(got) != 1 || got[0].Grid.Len() != 2 {
		t.Errorf("die readings: %d measurements, %v", len(got), err)
	}
	if _, err := ParseProfile([]byte(example(t, "profile: prober-3"))); err != nil {
		t.Errorf("profile: %v", err)
	}
	if c, err := ParseCatalogue([]byte(example(t, "catalogue: our-fab"))); err != nil || len(c.Products) != 1 || len(c.Quantities) != 1 {
		t.Errorf("catalogue: %+v, %v", c, err)
	}
	sheet, err := readHeld(t.Context(), Input{Name: "runs.csv", R: strings.NewReader(example(t, "# epitally: run sheet"))})
	if err != nil || len(sheet.rows) != 1 {
		t.Errorf("run sheet: %+v, %v", sheet.rows, err)
	}
}

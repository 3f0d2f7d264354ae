package main

import (
	"fmt"
	"time"

	"epitally/analytics/simfab"
)

// fabDocuments gives the fab's documents and run sheets: file name → text.
func fabDocuments(f *simfab.Fab) map[string][]byte {
	files := map[string][]byte{}
	for i, r := range runSheets(f) {
		files[fmt.Sprintf("runs/%s.csv", i)] = r
	}
	return files
}

// runSheets gives one run sheet per reactor.
func runSheets(f *simfab.Fab) map[string][]byte {
	sheets := map[string][]byte{}
	for i := range f.Wafers {
		w := &f.Wafers[i]
		b := sheets[w.Run.Reactor]
		if b == nil {
			b = []byte("# epitally: run sheet\nwafer,lot,reactor,run,grown_at,carrier,ring,pocket,recipe,product\n")
		}
		sheets[w.Run.Reactor] = fmt.Appendf(b, "%s,%s,%s,%d,%s,%s,%s,%s,%s,%s\n", w.Name, w.Lot, w.Run.Reactor, w.Run.Number,
			w.Run.GrownAt.Format(time.RFC3339), w.Run.Carrier, w.Ring, w.Pocket, w.Recipe.Name, w.Product.Name)
	}
	return sheets
}

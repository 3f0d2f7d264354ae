package jobs

import (
	"epitally/db"
	"epitally/jobs/reader"
)

// catalogueOf turns what the reader understood into what the store keeps.
func catalogueOf(c reader.Catalogue) db.Catalogue {
	out := db.Catalogue{Quantities: c.Quantities}
	for _, p := range c.Products {
		out.Products = append(out.Products, db.Product{Name: p.Name, Layout: p.Layout})
	}
	for _, r := range c.Recipes {
		recipe := db.Recipe{Name: r.Name, Colour: r.Colour}
		for _, t := range r.Targets {
			recipe.Targets = append(recipe.Targets, db.Target{Quantity: t.Quantity, Value: t.Value, Window: t.Window})
		}
		out.Recipes = append(out.Recipes, recipe)
	}
	for _, st := range c.Stations {
		out.Stations = append(out.Stations, db.Station{Name: st.Name, Uncertainty: st.Uncertainty})
	}
	return out
}

package main

import (
	"context"
	"fmt"

	"epitally/web"
)

// gallery writes every page from canned data, so that looks can be worked on
// without a database.
func gallery(_ context.Context, c *console, args []string) error {
	if len(args) != 1 || args[0] == "--help" {
		return fmt.Errorf("gallery: name the folder to write the pages to")
	}
	pages, err := web.NewPages(nil)
	if err != nil {
		return err
	}
	if err := pages.WriteGallery(args[0]); err != nil {
		return err
	}
	_, err = fmt.Fprintf(c.out, "The pages are in %s.\n", args[0])
	return err
}

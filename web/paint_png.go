package web

import (
	"errors"
	"io"
)

// PaintMap writes the map as a PNG.
func PaintMap(w io.Writer, p MapPicture) error { return errors.New("not built yet") }

// PaintSmallMap writes the small map as a PNG.
func PaintSmallMap(w io.Writer, m SmallPicture) error { return errors.New("not built yet") }

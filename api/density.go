package api

import (
	"bytes"
	"fmt"
	"math"
	"net/url"
	"slices"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/analytics/colour"
	"epitally/analytics/wafermap"
	"epitally/db"
	"epitally/web"
)

// densityURL is the address of the picture of the dies behind a plot. What it
// shows is all in the address, so that it can be kept.
func densityURL(d web.DensityPlot, ids []string) string {
	v := url.Values{"x": {d.X}, "space": {string(d.Space)}, "measurements": {strings.Join(ids, ",")},
		"box":  {fmt.Sprintf("%v,%v,%v,%v", d.Left, d.Right, d.Bottom, d.Top)},
		"size": {fmt.Sprintf("%d,%d", d.Width, d.Height)}}
	if d.Y != "" {
		v.Set("y", d.Y)
	}
	return "/bins/density.png?" + v.Encode()
}

// maxDensitySide bounds the picture's sides in pixels.
const maxDensitySide = 2000

// densityAsked reads the address back.
func densityAsked(c echo.Context) (d web.DensityPlot, ids []string, err error) {
	wrong := func(name string) error {
		return fmt.Errorf("%s %q: this address is made by the pages: %w", name, queryText(c, name), analytics.ErrInvalid)
	}
	d.X, d.Y, d.Space = queryText(c, "x"), queryText(c, "y"), binning.Space(queryText(c, "space"))
	box, size := strings.Split(queryText(c, "box"), ","), strings.Split(queryText(c, "size"), ",")
	if len(box) != 4 || len(size) != 2 {
		return d, nil, wrong("box")
	}
	for i, to := range []*float64{&d.Left, &d.Right, &d.Bottom, &d.Top} {
		if *to, err = strconv.ParseFloat(box[i], 64); err != nil || math.IsNaN(*to) || math.IsInf(*to, 0) {
			return d, nil, wrong("box")
		}
	}
	for i, to := range []*int{&d.Width, &d.Height} {
		if *to, err = strconv.Atoi(size[i]); err != nil || *to < 1 || *to > maxDensitySide {
			return d, nil, wrong("size")
		}
	}
	if !(d.Left < d.Right && d.Bottom < d.Top) {
		return d, nil, wrong("box")
	}
	if d.Y == "" && d.Space != binning.SpaceOwn || !slices.Contains([]binning.Space{binning.SpaceXY, binning.SpaceUV, binning.SpaceOwn}, d.Space) {
		return d, nil, wrong("space")
	}
	ids = strings.Split(queryText(c, "measurements"), ",")
	if len(ids) > mostWafers {
		return d, nil, fmt.Errorf("%d measurements, at most %d are drawn: %w", len(ids), mostWafers, analytics.ErrTooLarge)
	}
	return d, ids, nil
}

// getDensity draws how many dies have which values.
func (s *Server) getDensity(c echo.Context) error {
	d, ids, err := densityAsked(c)
	if err != nil {
		return err
	}
	if unchanged(c, tagOf(c.Request().URL.RawQuery), keepNumber) {
		return notModified(c)
	}
	numbers, err := numbersOf(ids)
	if err != nil {
		return err
	}
	quantities := []string{d.X}
	if d.Y != "" {
		quantities = append(quantities, d.Y)
	}
	field := web.NewDensityField(d)
	var x, y []float64
	err = s.store.EachStoredPlanes(c.Request().Context(), numbers, quantities, func(_ int64, planes []db.StoredPlane) error {
		if x, err = floatsOf(x, &planes[0]); err != nil {
			return err
		}
		if d.Y == "" {
			field.AddLine(x)
			return nil
		}
		if y, err = floatsOf(y, &planes[1]); err != nil {
			return err
		}
		if len(x) != len(y) {
			return nil // the measurement lacks one of the two
		}
		if d.Space == binning.SpaceUV && d.X == "cie_x" {
			for i := range x {
				q := colour.XY{X: x[i], Y: y[i]}.UV()
				x[i], y[i] = q.U, q.V
			}
		}
		field.Add(x, y)
		return nil
	})
	if err != nil {
		return err
	}
	var b bytes.Buffer
	if err := field.WritePNG(&b); err != nil {
		return err
	}
	return c.Blob(200, mediaPNG, b.Bytes())
}

func floatsOf(into []float64, sp *db.StoredPlane) ([]float64, error) {
	if sp.N == 0 {
		return into[:0], nil
	}
	p, err := db.DecodePlane("", *sp)
	if err != nil {
		return nil, err
	}
	return (*wafermap.Plane)(&p).Floats(into), nil
}

package api

import (
	"net/http"
	"reflect"
	"strings"

	"github.com/labstack/echo/v4"

	"epitally/analytics/colour"
)

// route is one address of the API: what the router and the OpenAPI document are
// both made from.
type route struct {
	method  string
	path    string // as OpenAPI writes it: /api/v1/wafers/{wafer}
	id      string // operationId
	summary string
	params  []parameter
	body    []string // media types of the request body; nil = none
	takes   any      // a value of a JSON body's type; nil = a specification document
	handle  echo.HandlerFunc
	answers []answer // of success
	tagged  bool     // has an ETag: 304 is possible
}

// answer is one form of a successful answer.
type answer struct {
	status int
	media  string
	sample any // a value of the JSON answer's type; nil = text or bytes
}

func asJSON(sample any) answer      { return answer{http.StatusOK, mediaJSON, sample} }
func asMedia(media string) answer   { return answer{http.StatusOK, media, nil} }
func (a answer) as(code int) answer { a.status = code; return a }

// get makes a GET route whose parameters are the fields of P.
func get[P any](path, id, summary string, h func(echo.Context, P) error, answers ...answer) route {
	params := parametersOf(reflect.TypeFor[P]())
	return route{method: http.MethodGet, path: path, id: id, summary: summary, params: params, answers: answers,
		handle: func(c echo.Context) error {
			var p P
			if err := readParams(c, params, reflect.ValueOf(&p).Elem()); err != nil {
				return err
			}
			return h(c, p)
		}}
}

// post makes a POST route that takes a YAML document.
func post[P any](path, id, summary string, h func(echo.Context, P) error, answers ...answer) route {
	r := get(path, id, summary, h, answers...)
	r.method, r.body = http.MethodPost, documentMedia
	return r
}

// takesBytes makes a route take a file as it is.
func takesBytes(r route) route {
	r.body = []string{mediaBytes}
	return r
}

// takesJSON makes a route take JSON of the sample's type.
func takesJSON(r route, sample any) route {
	r.body, r.takes = []string{mediaJSON}, sample
	return r
}

// kept marks a route whose answers have an ETag.
func kept(r route) route { r.tagged = true; return r }

// echoPath writes {name} as the router has it.
func echoPath(path string) string {
	return strings.NewReplacer("{", ":", "}", "").Replace(path)
}

type noParams struct{}

// routes is every address but the pages.
func (s *Server) routes() []route {
	const root = "/api/v1"
	const one = root + "/measurements/{id}"
	csv, png, plane := asMedia("text/csv"), asMedia(mediaPNG), asMedia(mediaPlane)
	return []route{
		get("/healthz", "alive", "Whether the server runs", s.alive, asJSON(healthOut{})),
		get("/readyz", "ready", "Whether the database answers too", s.ready, asJSON(healthOut{})),
		kept(get(root+"/openapi.json", "describe", "This document", s.describe, asJSON(anything{}))),

		get(root+"/wafers", "listWafers", "Wafers, newest measurement first", s.listWafers, asJSON(wafersOut{}), csv),
		get(root+"/wafers/{wafer}", "getWafer", "One wafer with its measurements, newest first", s.getWafer, asJSON(waferDetailOut{})),

		get(one, "getMeasurement", "One measurement without its planes", s.getMeasurement, asJSON(measurementOut{})),
		get(one+"/summaries", "listSummaries", "The summary of every plane, made when it was loaded", s.listSummaries, asJSON(summariesOut{}), csv),
		get(one+"/tallies", "listTallies", "The tallies made when the measurement was loaded", s.listTallies, asJSON(talliesOut{}), csv),
		get(one+"/tally", "getTally", "Bin the dies now, under any stored specification", s.getTally, asJSON(rebinnedOut{}), csv),
		post(one+"/tally", "makeTally", "Bin the dies now, under the specification in the body, which is not stored", s.makeTally, asJSON(rebinnedOut{}), csv),
		kept(get(one+"/bins", "getBins", "Bin the dies now: the code of every die", s.getBins, plane, asJSON(binsOut{}))),
		get(one+"/substrate-map.xml", "getSubstrateMap", "The bin of every die as a substrate map (SEMI E142)", s.getSubstrateMap, asMedia(mediaXML)),
		kept(get(one+"/planes/{quantity}", "getPlane", "One quantity of every die", s.getPlane, plane, asJSON(planeOut{}), csv)),
		get(one+"/dies", "listDies", "Every die with every quantity, or those named", s.listDies, csv, asJSON(diesOut{}), asMedia(mediaParquet), asMedia(mediaXLSX)),
		get(one+"/dies/{x}/{y}", "getDie", "One die: its place, its values, its bin", s.getDie, asJSON(dieOut{})),
		kept(get(one+"/map.png", "getMap", "The map of a quantity, or of the bins under a specification, as a picture", s.getMap, png)),
		kept(get(one+"/small-map.png", "getSmallMap", "The small map that lists show", s.getSmallMap, png)),
		kept(get(root+"/grids/{hash}", "getGrid", "The die grid that planes are indexed by", s.getGrid, asMedia(mediaGrid), asJSON(gridOut{}))),

		get(root+"/specifications", "listSpecifications", "The latest version of every specification", s.listSpecs, asJSON(specsOut{}), csv),
		post(root+"/specifications", "storeSpecification", "Store the document in the body as the next version of its specification", s.storeSpec,
			asJSON(specDetailOut{}).as(http.StatusCreated), asJSON(specDetailOut{})),
		get(root+"/specifications/{name}", "getSpecification", "The latest version of one specification", s.getSpec, asJSON(specDetailOut{}), asMedia(mediaYAML)),
		kept(get(root+"/specifications/{name}/versions/{version}", "getSpecificationVersion", "One version of a specification", s.getSpecVersion,
			asJSON(specDetailOut{}), asMedia(mediaYAML))),

		post(root+"/specifications/trial", "trySpecification", "Try the specification in the body, which is not stored, on many wafers, and check it", s.trySpec, asJSON(trialOut{})),

		takesJSON(post(root+"/calc/colour", "calcColour", "Colour and efficiency of a spectrum, a chromaticity, or a peak and width", s.calcColour, asJSON(colour.Answer{})), colourIn{}),

		get(root+"/quantities", "listQuantities", "Quantities, built in and declared", s.listQuantities, asJSON(quantitiesOut{}), csv),
		get(root+"/products", "listProducts", "Products with their layouts", s.listProducts, asJSON(productsOut{}), csv),
		get(root+"/recipes", "listRecipes", "Recipes with their targets", s.listRecipes, asJSON(recipesOut{}), csv),
		get(root+"/runs", "listRuns", "Growth runs, newest first", s.listRuns, asJSON(runsOut{}), csv),
		get(root+"/profiles", "listProfiles", "The latest version of every reading profile", s.listProfiles, asJSON(profilesOut{})),
		get(root+"/sources", "listSources", "Files that data came from, newest first", s.listSources, asJSON(sourcesOut{}), csv),
		takesBytes(post(uploadPath, "uploadSource", "Upload a file into the drop folder; it is loaded within seconds, as its source tells", s.uploadSource, asJSON(uploadOut{}).as(http.StatusAccepted))),
		get(root+"/sources/{id}", "getSource", "One source", s.getSource, asJSON(sourceOut{})),
	}
}

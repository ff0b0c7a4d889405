// Package sheet makes the field sheet: one HTML page that a crew reads on a
// phone and prints on A4. It holds everything it shows: no script, no file and
// no address beside it.
package sheet

import (
	_ "embed"
	"errors"
	"fmt"
	"html/template"
	"io"
	"math"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"foldshade/mask"
)

// Sheet is what the page shows. Angles are degrees, lengths metres, NaN what
// is not known; numbers are shown as they are given, with the decimals of
// their quantity.
type Sheet struct {
	Title string
	Looks []Look
	Sites []Site
	// Left is how many more sites there are than the sheet shows.
	Left int
	Maps []Map
	// MapDecimals is how many decimals map coordinates are shown with.
	MapDecimals int
	// Quantities are the numbers of a pair, in the order of the files. Those
	// that no pair of the sheet has a value for are not shown.
	Quantities []Quantity

	DEM      string
	Command  string
	Software string
	Made     time.Time
	Facts    [][2]string // what else decided the results: name and value
	Warnings []string
}

// Look is a candidate look.
type Look struct {
	Name  string
	Kind  string
	Pairs [][2]string // keys and values, as a file of looks has them
}

// Quantity is one number of a site under a look.
type Quantity struct {
	Key      string // in the files
	Title    string
	Unit     string
	Decimals int
}

// Site is a site with its results.
type Site struct {
	Name, Shape       string
	Lon, Lat          float64 // WGS84
	X, Y              float64 // map units of the DEM's CRS
	Ground            float64 // height of the surface
	Height, Footprint float64
	Problem           string // why it was not judged; empty when it was
	Pairs             []Pair // one a look, in the order of the looks
	Sky               []Ray
	// Profiles are the terrain under some looks; the first is shown open.
	Profiles []Profile
}

// Pair is the result of a site under a look.
type Pair struct {
	Code      int
	Class     string
	Verdict   string
	Reason    string
	Values    map[string]float64 // by the key of the quantity
	Notes     []string           // sentences beside the reason
	ToRadar   float64            // azimuth from the site to the radar, true north
	Incidence float64
}

// Ray is what a plane wave from one azimuth can do at a site, as in
// mask.SkyRay. ToRadar is the azimuth from the site to the radar.
type Ray struct {
	ToRadar, Low, High, LowSure, HighSure float64
}

// mostSites is the most sites of a sheet: about as many pages.
const mostSites = 60

// MostSites returns how many sites a sheet shows at most.
func MostSites() int { return mostSites }

//go:embed sheet.html
var page string

//go:embed sheet.css
var style string

var pageTemplate = template.Must(template.New("sheet").Funcs(template.FuncMap{
	"letter": letter, "number": number, "inc": func(i int) int { return i + 1 },
	"symbol": symbol, "css": func() template.CSS { return template.CSS(style) },
	"verdictClass": verdictClass, "title": classTitle, "base": filepath.Base,
}).Parse(page))

// Render writes the page. It returns an error when a site has another number
// of pairs than there are looks, and those of w.
func Render(w io.Writer, s *Sheet) error {
	if len(s.Looks) == 0 || len(s.Sites) == 0 {
		return errors.New("sheet: no looks or no sites")
	}
	for i := range s.Sites {
		if n := len(s.Sites[i].Pairs); n != len(s.Looks) {
			return fmt.Errorf("sheet: site %q has %d pairs for %d looks", s.Sites[i].Name, n, len(s.Looks))
		}
	}
	return pageTemplate.Execute(w, newView(s))
}

// letter names a look on charts: A to Z, then AA and so on.
func letter(i int) string {
	if i >= 26 {
		return letter(i/26-1) + letter(i%26)
	}
	return string(rune('A' + i))
}

// number writes a value with its decimals; a dash where there is none.
func number(v float64, decimals int) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return "–"
	}
	text := strconv.FormatFloat(v, 'f', decimals, 64)
	if strings.Trim(text, "-0.") == "" {
		text = strings.TrimPrefix(text, "-")
	}
	return text
}

// symbol is the sign of a verdict, which says it without colour.
func symbol(verdict string) string {
	switch mask.Verdict(verdict) {
	case mask.Usable:
		return "✓"
	case mask.Marginal:
		return "≈"
	case mask.Unusable:
		return "✕"
	case mask.NotSeen:
		return "–"
	}
	return "?"
}

// verdictClass is the style of a verdict.
func verdictClass(verdict string) string {
	for _, v := range mask.Verdicts {
		if string(v) == verdict {
			return "v-" + verdict
		}
	}
	return "v-" + string(mask.UndeterminedThere)
}

// classTitle is the title of a class code.
func classTitle(code int) string {
	for _, c := range mask.Classes {
		if int(c.Code) == code {
			return c.Title
		}
	}
	return fmt.Sprintf("Class %d", code)
}

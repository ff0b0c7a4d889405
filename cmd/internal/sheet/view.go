package sheet

import (
	"html/template"
	"math"
	"slices"

	"foldshade/mask"
)

// view is the page made ready for the template.
type view struct {
	*Sheet
	Blocks  []block // of the table of sites and looks
	Details []siteView
	Legend  []legendEntry
	Tally   []verdictCount
	MapList []mapView
	Defs    template.HTML
	Numbers []Quantity // of the long tables
}

// perBlock is the most looks beside each other in a table.
const perBlock = 4

// block is a part of the looks.
type block struct {
	Looks []lookRef
}

// lookRef is a look by its place in the list.
type lookRef struct {
	Index  int
	Letter string
	Name   string
}

type legendEntry struct {
	Title, Description string
	Swatch             template.HTML
}

type verdictCount struct {
	Verdict string
	Pairs   int
}

// siteView is a site with its charts.
type siteView struct {
	*Site
	Number   int
	SkyChart template.HTML
	Charts   []chart
	HasMast  bool
}

// chart is the profile of one look.
type chart struct {
	lookRef
	Picture template.HTML
	Text    string // what the picture shows, in words
	First   bool
}

// mapView is a map with its overlay.
type mapView struct {
	lookRef
	Picture template.HTML
	Text    string
}

// short are the quantities of the table of each site, in its order, with
// titles for narrow columns; the long table has all.
var short = []Quantity{
	{Key: "clearance", Title: "Clear\u00adance"}, {Key: "fold_margin", Title: "Fold margin"}, {Key: "mast_to_clear", Title: "Mast to clear"},
	{Key: "p_open", Title: "P (open)"}, {Key: "to_radar", Title: "Radar at, true"}, {Key: "to_radar_grid", Title: "Radar at, grid"},
	{Key: "elevation", Title: "Eleva\u00adtion"}, {Key: "incidence", Title: "Inci\u00addence"}, {Key: "local_incidence", Title: "Local inc."},
}

func newView(s *Sheet) *view {
	v := &view{Sheet: s, Legend: legend(), Tally: tally(s), Defs: defs()}
	for from := 0; from < len(s.Looks); from += perBlock {
		var b block
		for i := from; i < min(from+perBlock, len(s.Looks)); i++ {
			b.Looks = append(b.Looks, s.look(i))
		}
		v.Blocks = append(v.Blocks, b)
	}
	for _, q := range s.Quantities {
		if s.has(q.Key) {
			v.Numbers = append(v.Numbers, q)
		}
	}
	for i := range s.Maps {
		m := &s.Maps[i]
		v.MapList = append(v.MapList, mapView{s.look(m.Look), m.draw(s), m.words(s)})
	}
	for i := range s.Sites {
		v.Details = append(v.Details, s.site(i))
	}
	return v
}

func (s *Sheet) look(i int) lookRef { return lookRef{i, letter(i), s.Looks[i].Name} }

// has reports whether any pair has a value for a quantity.
func (s *Sheet) has(key string) bool {
	for i := range s.Sites {
		for k := range s.Sites[i].Pairs {
			if v, ok := s.Sites[i].Pairs[k].Values[key]; ok && !math.IsNaN(v) {
				return true
			}
		}
	}
	return false
}

// Short returns the quantities of the table of each site.
func (v *view) Short() []Quantity {
	var list []Quantity
	for _, q := range short {
		if i := slices.IndexFunc(v.Numbers, func(n Quantity) bool { return n.Key == q.Key }); i >= 0 {
			q.Unit, q.Decimals = v.Numbers[i].Unit, v.Numbers[i].Decimals
			list = append(list, q)
		}
	}
	return list
}

// Pair returns a pair of a site.
func (s *siteView) Pair(look int) *Pair { return &s.Pairs[look] }

// Value returns a number of the pair, NaN where it has none.
func (p *Pair) Value(key string) float64 {
	if v, ok := p.Values[key]; ok {
		return v
	}
	return math.NaN()
}

func (s *Sheet) site(i int) siteView {
	site := &s.Sites[i]
	v := siteView{Site: site, Number: i + 1, HasMast: site.Height > 0}
	if len(site.Sky) > 0 {
		v.SkyChart = drawSky(site)
	}
	for k := range site.Profiles {
		p := &site.Profiles[k]
		v.Charts = append(v.Charts, chart{s.look(p.Look), p.draw(site, i+1), p.words(site), k == 0})
	}
	return v
}

func tally(s *Sheet) []verdictCount {
	var list []verdictCount
	for _, verdict := range mask.Verdicts {
		n := 0
		for i := range s.Sites {
			for k := range s.Sites[i].Pairs {
				if s.Sites[i].Pairs[k].Verdict == string(verdict) {
					n++
				}
			}
		}
		if n > 0 {
			list = append(list, verdictCount{string(verdict), n})
		}
	}
	return list
}

// group is the classes that share a colour.
func legend() []legendEntry {
	var list []legendEntry
	seen := map[string]bool{}
	for _, c := range mask.Classes {
		if c.Color == "" || seen[c.Color] {
			continue
		}
		seen[c.Color] = true
		e := legendEntry{c.Title, c.Description, swatch(c.Code)}
		if c.Code == mask.LayoverFarther {
			e.Title, e.Description = "Passive layover", "another lit point of the range line has the same slant range"
		}
		list = append(list, e)
	}
	return list
}

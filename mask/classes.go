package mask

import "fmt"

// Class is the code of a cell in every class raster. The tens digit is the
// kind, the units digit the cause; 0 is nodata. The numbers are written to
// files: they are never renumbered.
type Class uint8

// The class codes of every class raster.
const (
	NoData         Class = 0  // hole in the DEM, or not seen by this look
	Open           Class = 10 // lit, measured once
	Compressed     Class = 20 // foreshortening below the limit; verdict only
	ActiveLayover  Class = 30 // slant range decreases away from the radar
	LayoverFarther Class = 31 // passive layover, partner farther
	LayoverNearer  Class = 32 // passive layover, partner nearer
	LayoverBoth    Class = 33 // passive layover, partners on both sides
	SelfShadow     Class = 40 // hidden, lee slope steeper than 90 deg - incidence
	CastShadow     Class = 41 // hidden behind nearer terrain
	Undetermined   Class = 50 // depends on terrain that the DEM does not show
)

// ClassInfo is what files and tables say of a class.
type ClassInfo struct {
	Code        Class
	Name        string // letters, digits, hyphen
	Title       string
	Description string
	Color       string // #rrggbb, lower case; empty for no data
}

// Classes lists every class in the order of its code.
var Classes = []ClassInfo{
	{NoData, "no-data", "No data", "hole in the DEM, or not seen by this look", ""},
	{Open, "open", "Open", "lit, and the only ground at its slant range", "#f6f1e4"},
	{Compressed, "compressed", "Compressed", "foreshortening below the limit", "#f2c14e"},
	{ActiveLayover, "active-layover", "Active layover", "slope facing the radar and steeper than the incidence", "#9b2226"},
	{LayoverFarther, "passive-layover-farther", "Passive layover, partner farther", "a lit point farther along the range line has the same slant range", "#e07a5f"},
	{LayoverNearer, "passive-layover-nearer", "Passive layover, partner nearer", "a lit point nearer along the range line has the same slant range", "#e07a5f"},
	{LayoverBoth, "passive-layover-both", "Passive layover, partners on both sides", "lit points nearer and farther have the same slant range", "#e07a5f"},
	{SelfShadow, "self-shadow", "Self shadow", "lee slope steeper than 90 degrees less the incidence", "#0b2a3c"},
	{CastShadow, "cast-shadow", "Cast shadow", "hidden behind nearer terrain", "#3d8ab5"},
	{Undetermined, "undetermined", "Undetermined", "depends on terrain that the DEM does not show", "#a9a59b"},
}

// Kind returns the tens digit of the code: 0 no data, 1 open, 2 compressed,
// 3 layover, 4 shadow, 5 undetermined.
func (c Class) Kind() int { return int(c) / 10 }

// String returns the class's name, or "class N" for a number that is none.
func (c Class) String() string {
	for _, k := range Classes {
		if k.Code == c {
			return k.Name
		}
	}
	return fmt.Sprintf("class %d", uint8(c))
}

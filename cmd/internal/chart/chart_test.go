package chart

import (
	"bytes"
	"encoding/xml"
	"errors"
	"image/png"
	"io"
	"math"
	"os"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// sample is a look space with a known shape: open share falls with the distance
// from azimuth 105, incidence 41.
func sample() *Chart {
	c := &Chart{Title: "Looks over the Oltrenza valley", Subtitle: "24 azimuths x 31 incidences, 186 234 cells"}
	for a := 0.0; a < 360; a += 15 {
		c.Azimuths = append(c.Azimuths, a)
	}
	for i := 20.0; i <= 50; i++ {
		c.Incidences = append(c.Incidences, i)
	}
	for _, a := range c.Azimuths {
		for _, i := range c.Incidences {
			c.Share = append(c.Share, 0.55+0.2*math.Cos((a-105)*math.Pi/180)-0.0007*(i-41)*(i-41))
		}
	}
	c.Marks = []Mark{
		{Kind: Best, Azimuth: 105, Incidence: 41, Text: "best single look: azimuth 105°, incidence 41°, 75.0 % open"},
		{Kind: Pair, Azimuth: 105, Incidence: 41, Text: "best pair by coverage: 105°/41° and 285°/44°, 93.1 % open in at least one"},
		{Kind: Pair, Azimuth: 285, Incidence: 44, Text: "best pair by coverage: 105°/41° and 285°/44°, 93.1 % open in at least one"},
		{Kind: Two, Azimuth: 90, Incidence: 40, Text: "best pair for east and up"},
		{Kind: User, Azimuth: 192.8, Incidence: 39, Name: "north-west", Text: "candidate north-west"},
	}
	return c
}

func TestPNG(t *testing.T) {
	var b bytes.Buffer
	require.NoError(t, sample().PNG(&b))
	if name := os.Getenv("CHART_PNG"); name != "" {
		require.NoError(t, os.WriteFile(name, b.Bytes(), 0o600))
	}
	img, err := png.Decode(&b)
	require.NoError(t, err)
	// The cell of the largest share is darker than the one across the centre.
	d := newDrawing(sample())
	grey := func(azimuth, incidence float64) uint32 {
		p := d.at(azimuth, incidence)
		const perPoint = 150.0 / 72
		r, g, bl, _ := img.At(int(float64(p.X)*perPoint), img.Bounds().Dy()-int(float64(p.Y)*perPoint)).RGBA()
		return (r + g + bl) / 3
	}
	assert.Less(t, grey(107, 44), grey(197, 44))
	assert.Less(t, grey(197, 44), grey(272, 30))
}

// TestRampInGrey: lightness falls all the way, so that a print without colour
// keeps the order. Luma weights: ITU-R BT.601 (from memory).
func TestRampInGrey(t *testing.T) {
	last := math.Inf(1)
	for i := range 101 {
		c := shade(float64(i) / 100)
		y := 0.299*float64(c.R) + 0.587*float64(c.G) + 0.114*float64(c.B)
		assert.Less(t, y, last)
		last = y
	}
}

func TestSVGIsXML(t *testing.T) {
	c := sample()
	c.Title = `a < b & "c"`
	var b bytes.Buffer
	require.NoError(t, c.SVG(&b))
	decoder := xml.NewDecoder(&b)
	texts := ""
	for {
		token, err := decoder.Token()
		if err == io.EOF {
			break
		}
		require.NoError(t, err)
		if s, ok := token.(xml.CharData); ok {
			texts += string(s) + "\n"
		}
	}
	for _, want := range []string{`a < b & "c"`, "N 0°", "E 90°", "30°", "share of the cells that are open", "north-west"} {
		assert.Contains(t, texts, want)
	}
}

func TestOddSpaces(t *testing.T) {
	for name, c := range map[string]*Chart{
		"one look":        {Azimuths: []float64{90}, Incidences: []float64{35}, Share: []float64{0}},
		"a fan":           {Azimuths: []float64{80, 90, 100}, Incidences: []float64{1, 89}, Share: make([]float64, 6)},
		"uneven azimuths": {Azimuths: []float64{0, 10, 180}, Incidences: []float64{20, 30}, Share: []float64{1, 1, 1, 1, 1, 1}},
	} {
		assert.NoError(t, c.PNG(io.Discard), name)
		assert.NoError(t, c.SVG(io.Discard), name)
	}
	assert.Error(t, (&Chart{}).PNG(io.Discard))
	assert.Error(t, (&Chart{Azimuths: []float64{1}, Incidences: []float64{30}, Share: []float64{1, 2}}).SVG(io.Discard))
	assert.ErrorIs(t, sample().SVG(failing{}), errFull)
}

var errFull = errors.New("disk full")

type failing struct{}

func (failing) Write([]byte) (int, error) { return 0, errFull }

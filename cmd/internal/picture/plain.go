package picture

import "image"

// Plain is the ground of a map alone, without frame, legend and names, for
// pages that draw those themselves.
type Plain struct {
	Image          *image.RGBA
	MetresPerPixel float64
	North          float64 // true north, radians clockwise from up
	ground         *ground
}

// Draw draws the ground of a map, at most width by height pixels. Its texture
// is made for pictures that are shown at their own size or not far below.
func Draw(m Map, width, height int) (*Plain, error) {
	if err := m.check(); err != nil {
		return nil, err
	}
	g := survey(&m)
	w, h := g.size(float64(width), float64(height))
	return &Plain{g.picture(w, h), g.width / float64(w), g.north, g}, nil
}

// At returns the pixel position of map coordinates, which may lie outside the
// picture.
func (p *Plain) At(x, y float64) (px, py float64) {
	b := p.Image.Bounds()
	at, _ := p.ground.pixel(x, y, box{0, 0, float64(b.Dx()), float64(b.Dy())})
	return at.x, at.y
}

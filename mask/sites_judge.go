package mask

import "math"

// finding is what a line says of a target over its point: the margins, and the
// spots that set them, nil where none does.
type finding struct {
	margins
	blocker, partner *spot
	// nearR and farR are the slant ranges of the lit ground on either side that
	// the target must stay between, r its own.
	nearR, farR, r float64
}

// judge keeps the room that judging lines takes.
type judge struct {
	stack []int  // spots towards the radar that nothing nearer to it hides
	doubt []bool // of each spot: unknown terrain may hide it
}

// target is what stands over the point of a line.
type target struct {
	m, r   float64
	gain   float64 // change of m for a metre of height
	drop   float64 // slant range less for a metre of height
	raised bool    // it stands above the ground
}

// target returns what stands mast metres above the line's point.
func (l *line) target(mast float64) target {
	h := l.here.h + mast
	m, r := l.y.see(l.here.s, h)
	up, nearer := l.y.see(l.here.s, h+1)
	return target{m: m, r: r, gain: up - m, drop: r - nearer, raised: mast > 0}
}

// of returns what a line says of a target. The rules are walker's. A tie counts against the target; ground less
// than a row away decides signs but not sizes, since on curved ground an
// overlap or a shadow may begin right at the point.
//
// A raised target shares its slant range with the ground right in front of its
// foot. That is its own surroundings and no fold: the ground towards the radar
// as far as slant range first falls below the target's, unless it reaches the
// slant range of the foot. The row beyond counts as less than a row away.
func (j *judge) of(l *line, t target) finding {
	r := t.r
	f := finding{r: r}
	own, closeU := 0, l.here.u-1
	if t.raised {
		last := &l.here
		for own < len(l.near) && !l.near[own].unknown && l.near[own].r >= r {
			last = &l.near[own]
			own++
		}
		closeU = last.u - 1
		if own < len(l.near) && !l.near[own].unknown {
			next := &l.near[own]
			closeU += (last.r - r) / (last.r - next.r) * (next.u - last.u)
		}
	}
	top, topU, mostU := j.towards(l, t.m, &f)
	f.clear, f.clearU = f.clear/t.gain, f.clearU/t.gain
	j.nearest(l, own, closeU, mostU, &f)
	away(l, top, topU, &f)
	return f
}

// towards fills the clearance and the stack. It returns the largest m of known
// and of unknown ground, and the largest slant range of unknown ground.
func (j *judge) towards(l *line, m float64, f *finding) (top, topU, mostU float64) {
	inf := math.Inf(-1)
	closeM, farM := inf, inf
	var closest, farthest *spot
	topU, mostU = inf, inf
	j.stack, j.doubt = j.stack[:0], resize(j.doubt, len(l.near))
	whole := l.here.u - 1
	for i := range l.near {
		q := &l.near[i]
		j.doubt[i] = false
		n := len(j.stack)
		if q.unknown {
			topU, mostU = max(topU, q.m), max(mostU, q.r)
			for n--; n >= 0 && l.near[j.stack[n]].m <= q.m; n-- {
				j.doubt[j.stack[n]] = true
			}
			continue
		}
		if q.u > whole {
			if q.m > closeM {
				closeM, closest = q.m, q
			}
		} else if q.m > farM {
			farM, farthest = q.m, q
		}
		for n > 0 && l.near[j.stack[n-1]].m <= q.m {
			n--
		}
		j.stack = append(j.stack[:n], i)
	}
	top = max(closeM, farM)
	f.clear, f.clearU, f.blocker = m-farM, m-topU, farthest
	if closeM >= m && closeM > farM {
		f.clear, f.blocker = m-closeM, closest
	}
	return top, topU, mostU
}

// nearest fills the margins to the lit ground nearer to the radar, all that is
// left on the stack but the target's own surroundings, the first own spots.
// Where a lit stretch begins between two spots, its beginning counts.
func (j *judge) nearest(l *line, own int, closeU, mostU float64, f *finding) {
	inf := math.Inf(-1)
	closeR, farR, any := inf, inf, mostU
	var closest, farthest *spot
	for n, i := range j.stack {
		q := &l.near[i]
		best := q.r
		if n+1 < len(j.stack) && j.stack[n+1] != i+1 && !l.near[i+1].unknown {
			next, top := &l.near[i+1], l.near[j.stack[n+1]].m
			best = max(best, q.r+(top-q.m)/(next.m-q.m)*(next.r-q.r))
		}
		if q.u > closeU && n+1 < len(j.stack) && j.stack[n+1] == i+1 && l.near[i+1].u < closeU {
			// The row beyond the own surroundings ends between two spots.
			next := &l.near[i+1]
			end := q.r + (closeU-q.u)/(next.u-q.u)*(next.r-q.r)
			any = max(any, end)
			if !j.doubt[i] && end > farR {
				farR, farthest = end, next
			}
		}
		if i < own && best < l.here.r {
			continue
		}
		if q.u <= closeU || best >= f.r {
			any = max(any, best)
		}
		switch {
		case j.doubt[i]:
		case q.u > closeU:
			if best > closeR {
				closeR, closest = best, q
			}
		case best > farR:
			farR, farthest = best, q
		}
	}
	if closeR >= f.r && closeR > farR {
		farR, farthest = closeR, closest
	}
	f.near, f.nearU, f.nearR, f.partner = f.r-farR, f.r-any, farR, farthest
}

// away fills the margins to the lit ground farther from the radar. top and topU
// are the largest m towards the radar, without the point itself.
func away(l *line, top, topU float64, f *finding) {
	inf := math.Inf(1)
	closeR, farR, any := inf, inf, inf
	var closest, farthest *spot
	prev, hidden := &l.here, l.here.m <= top
	top = max(top, l.here.m)
	whole := l.here.u + 1
	for i := range l.far {
		q := &l.far[i]
		if q.unknown {
			topU, any = max(topU, q.m), min(any, q.r)
			prev, hidden = q, false
			continue
		}
		if q.m <= top {
			prev, hidden = q, true
			continue
		}
		best := q.r
		if hidden && !prev.unknown {
			best = min(best, prev.r+(top-prev.m)/(q.m-prev.m)*(q.r-prev.r))
		}
		near := q.u < whole
		if !near || best <= f.r {
			any = min(any, best)
		}
		switch {
		case q.m <= topU:
		case near:
			if best < closeR {
				closeR, closest = best, q
			}
		case best < farR:
			farR, farthest = best, q
		}
		top, prev, hidden = q.m, q, false
	}
	if closeR <= f.r && closeR < farR {
		farR, farthest = closeR, closest
	}
	f.far, f.farU, f.farR = farR-f.r, any-f.r, farR
	if f.far < f.near {
		f.partner = farthest
	}
}

// lane returns the margins as the lanes keep them: no larger than terrain at
// the edge of the reach can make them. foot is the height of the point, h that
// of the target.
func (f *finding) lane(fd *field, foot, h float64) lane {
	shade, nearer, farther := fd.limitLines()
	cos := fd.ln.cos
	most, above, below := h-shade, (nearer-foot)*cos, (h-farther)*cos
	return lane{
		clear: float32(min(f.clear, most)), clearU: float32(min(f.clearU, most)),
		near: float32(min(f.near, above)), nearU: float32(min(f.nearU, above)),
		far: float32(min(f.far, below)), farU: float32(min(f.farU, below)),
	}
}

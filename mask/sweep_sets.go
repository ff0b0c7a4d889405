package mask

import (
	"context"
	"math/bits"
	"slices"
	"sync"
	"sync/atomic"

	"golang.org/x/sync/errgroup"
)

// setSearch seeks the best sets of looks.
type setSearch struct {
	open  []int64              // cells open in each look
	both  func(a, b int) int64 // cells open in two looks
	apart func(a, b int) bool  // whether two looks separate east and up
	more  opens                // for sets of three looks and more
}

// opens knows which cells are open in which looks.
type opens interface {
	// serve returns, for every look, the cells that are served when it joins
	// the chosen ones.
	serve(ctx context.Context, chosen []int, g *goal) ([]int64, error)
	// exhaust returns the best set of a size, or ok false when there are too
	// many to try.
	exhaust(ctx context.Context, size int, g *goal) (set LookSet, ok bool, err error)
}

// goal says when a cell is served: open in at least one look, or in two that
// are apart.
type goal struct {
	two   bool
	apart func(a, b int) bool
}

// served reports whether some of the chosen looks, those of the mask, serve.
func (g *goal) served(chosen []int, mask uint) bool {
	if !g.two {
		return mask != 0
	}
	for i := range chosen {
		if mask>>i&1 == 1 && g.joins(chosen, mask, chosen[i]) {
			return true
		}
	}
	return false
}

// joins reports whether a look serves together with those of the mask.
func (g *goal) joins(chosen []int, mask uint, look int) bool {
	if !g.two {
		return true
	}
	for i, c := range chosen {
		if mask>>i&1 == 1 && g.apart(c, look) {
			return true
		}
	}
	return false
}

// best returns the best sets of up to most looks. Of sets that serve the same
// number of cells it takes the one with the lower indices.
func (s *setSearch) best(ctx context.Context, most int) (coverage, two []LookSet, err error) {
	if one := largest(s.open); one.Cells > 0 {
		coverage = append(coverage, one)
	}
	if most < 2 || len(coverage) == 0 {
		return coverage, nil, nil
	}
	pair := s.pair(func(a, b int) int64 { return s.open[a] + s.open[b] - s.both(a, b) })
	apart := s.pair(func(a, b int) int64 {
		if !s.apart(a, b) {
			return 0
		}
		return s.both(a, b)
	})
	if pair.Cells > coverage[0].Cells {
		coverage = append(coverage, pair)
	}
	if apart.Cells > 0 {
		two = append(two, apart)
	}
	if coverage, err = s.extend(ctx, coverage, 1, most, &goal{apart: s.apart}); err != nil {
		return nil, nil, err
	}
	two, err = s.extend(ctx, two, 2, most, &goal{two: true, apart: s.apart})
	return coverage, two, err
}

func largest(counts []int64) LookSet {
	best := LookSet{Looks: []int{0}, Exact: true}
	for i, n := range counts {
		if n > best.Cells {
			best.Looks[0], best.Cells = i, n
		}
	}
	return best
}

func (s *setSearch) pair(value func(a, b int) int64) LookSet {
	best := LookSet{Looks: []int{0, 0}, Exact: true}
	for a := range s.open {
		for b := a + 1; b < len(s.open); b++ {
			if n := value(a, b); n > best.Cells {
				best.Looks[0], best.Looks[1], best.Cells = a, b, n
			}
		}
	}
	return best
}

// extend adds sets of three looks and more, as long as they gain, to those of
// up to two. first is the size of sets[0].
func (s *setSearch) extend(ctx context.Context, sets []LookSet, first, most int, g *goal) ([]LookSet, error) {
	if s.more == nil || len(sets) < 3-first {
		return sets, nil // a pair gains nothing, nor will more
	}
	for size := 3; size <= most; size++ {
		last := sets[len(sets)-1]
		next, ok, err := s.more.exhaust(ctx, size, g)
		if err != nil {
			return nil, err
		}
		if !ok {
			counts, err := s.more.serve(ctx, last.Looks, g)
			if err != nil {
				return nil, err
			}
			one := largest(counts)
			next = LookSet{Looks: append(slices.Clone(last.Looks), one.Looks[0]), Cells: one.Cells}
		}
		if next.Cells <= last.Cells {
			// One look more may do nothing for two directions where two more do.
			if ok && g.two {
				continue
			}
			break
		}
		sets = append(sets, next)
	}
	return sets, nil
}

// openStore keeps the open incidences of every cell and azimuth, tile by tile.
type openStore struct {
	azimuths, n int
	threads     int
	file        Scratch

	mu     sync.Mutex
	chunks []chunk
	size   int64
}

// chunk is what one tile left: for every azimuth the first open incidences of
// its cells, then the ends.
type chunk struct {
	at    int64
	cells int
	data  []byte // when there is no file
}

func newOpenStore(azimuths, n int, file Scratch, threads int) *openStore {
	return &openStore{azimuths: azimuths, n: n, file: file, threads: threads}
}

// put keeps a tile. It leaves the slices to the caller.
func (o *openStore) put(from, to [][]uint8, cells int) error {
	if cells == 0 {
		return nil
	}
	bytes := 2 * cells * o.azimuths
	o.mu.Lock()
	c := chunk{at: o.size, cells: cells}
	o.size += int64(bytes)
	if o.file == nil {
		c.data = make([]byte, bytes)
	}
	o.chunks = append(o.chunks, c)
	o.mu.Unlock()
	at := 0
	for a := range o.azimuths {
		for _, part := range [2][]uint8{from[a], to[a]} {
			if o.file == nil {
				copy(c.data[at:], part)
			} else if _, err := o.file.WriteAt(part, c.at+int64(at)); err != nil {
				return err
			}
			at += cells
		}
	}
	return nil
}

// exhaust tries nothing: there are too many sets.
func (o *openStore) exhaust(context.Context, int, *goal) (LookSet, bool, error) {
	return LookSet{}, false, nil
}

func (o *openStore) serve(ctx context.Context, chosen []int, g *goal) ([]int64, error) {
	masks := 1 << len(chosen)
	done := make([]bool, masks)
	for m := range done {
		done[m] = g.served(chosen, uint(m))
	}
	// By azimuth, mask and incidence: the differences of the numbers of cells
	// that the chosen looks of the mask, and no others, see.
	w := o.n + 1
	sum := make([]int64, o.azimuths*masks*w)
	served := int64(0)
	var mu sync.Mutex
	var next atomic.Int64
	group, ctx := errgroup.WithContext(ctx)
	for range o.threads {
		group.Go(func() error {
			part := make([]int64, len(sum))
			var buf []byte
			var seen []uint8
			n := int64(0)
			for {
				i := int(next.Add(1)) - 1
				if i >= len(o.chunks) {
					mu.Lock()
					defer mu.Unlock()
					addTo(sum, part)
					served += n
					return nil
				}
				if err := ctx.Err(); err != nil {
					return err
				}
				c := o.chunks[i]
				data := c.data
				if o.file != nil {
					buf = resize(buf, 2*c.cells*o.azimuths)
					if _, err := o.file.ReadAt(buf, c.at); err != nil {
						return err
					}
					data = buf
				}
				seen = resize(seen, c.cells)
				n += o.tally(data, c.cells, chosen, done, seen, part)
			}
		})
	}
	if err := group.Wait(); err != nil {
		return nil, err
	}
	out := make([]int64, o.azimuths*o.n)
	for look := range out {
		a, i := look/o.n, look%o.n
		out[look] = served
		for m := range done {
			if done[m] || !g.joins(chosen, uint(m), look) {
				continue
			}
			for _, d := range sum[(a*masks+m)*w:][:i+1] {
				out[look] += d
			}
		}
	}
	return out, nil
}

// tally counts the cells of a chunk into the sums and returns how many of them
// are served.
func (o *openStore) tally(data []byte, cells int, chosen []int, done []bool, seen []uint8, sum []int64) (served int64) {
	from := func(a int) []byte { return data[2*a*cells:][:cells] }
	to := func(a int) []byte { return data[(2*a+1)*cells:][:cells] }
	clear(seen)
	for k, look := range chosen {
		i := uint8(look % o.n)
		f, t := from(look/o.n), to(look/o.n)
		for c := range seen {
			if f[c] <= i && i < t[c] {
				seen[c] |= 1 << k
			}
		}
	}
	for _, m := range seen {
		if done[m] {
			served++
		}
	}
	w := o.n + 1
	for a := range o.azimuths {
		f, t := from(a), to(a)
		part := sum[a*len(done)*w:]
		for c, m := range seen {
			if f[c] < t[c] && !done[m] {
				row := part[int(m)*w:][:w]
				row[f[c]]++
				row[t[c]]--
			}
		}
	}
	return served
}

// patterns counts the cells by the looks in which they are open, one bit a look.
type patterns struct {
	looks int
	count map[uint64]int64
	words []uint64 // after gather, ascending
	cells []int64
}

// patternBits is the most looks of a pattern.
const patternBits = 64

func newPatterns(looks int) *patterns { return &patterns{looks: looks, count: map[uint64]int64{}} }

// add counts the cells of a tile. words is scratch.
func (p *patterns) add(from, to [][]uint8, n int, words []uint64) []uint64 {
	words = resize(words, len(from[0]))
	clear(words)
	for a := range from {
		for c := range words {
			if f, t := from[a][c], to[a][c]; f < t {
				words[c] |= (1<<t - 1<<f) << (a * n)
			}
		}
	}
	p.addWords(words)
	return words
}

func (p *patterns) addWords(words []uint64) {
	last, run := uint64(0), int64(0) // neighbours are often alike
	for _, w := range words {
		if w != last && run > 0 {
			p.count[last] += run
			run = 0
		}
		last = w
		run++
	}
	if run > 0 {
		p.count[last] += run
	}
}

func (p *patterns) merge(o *patterns) {
	for w, n := range o.count {
		p.count[w] += n
	}
}

// gather sorts what was counted.
func (p *patterns) gather() {
	p.words, p.cells = p.words[:0], p.cells[:0]
	for w := range p.count {
		if w != 0 {
			p.words = append(p.words, w)
		}
	}
	slices.Sort(p.words)
	for _, w := range p.words {
		p.cells = append(p.cells, p.count[w])
	}
}

// both returns the cells open in two looks.
func (p *patterns) both(a, b int) (n int64) {
	set := uint64(1)<<a | uint64(1)<<b
	for i, w := range p.words {
		if w&set == set {
			n += p.cells[i]
		}
	}
	return n
}

// mates returns, for every look, those that it is apart from.
func (p *patterns) mates(g *goal) (m [patternBits]uint64) {
	for a := range p.looks {
		for b := range p.looks {
			if a != b && g.apart(a, b) {
				m[a] |= 1 << b
			}
		}
	}
	return m
}

// value returns the cells that a set serves.
func (p *patterns) value(set uint64, g *goal, mates *[patternBits]uint64) (n int64) {
	for i, w := range p.words {
		w &= set
		if !g.two && w != 0 {
			n += p.cells[i]
		}
		for rest := w; g.two && rest != 0; rest &= rest - 1 {
			if mates[bits.TrailingZeros64(rest)]&w != 0 {
				n += p.cells[i]
				break
			}
		}
	}
	return n
}

func (p *patterns) serve(ctx context.Context, chosen []int, g *goal) ([]int64, error) {
	set := uint64(0)
	for _, c := range chosen {
		set |= 1 << c
	}
	mates := p.mates(g)
	out := make([]int64, p.looks)
	for look := range out {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		out[look] = p.value(set|1<<look, g, &mates)
	}
	return out, nil
}

// exhaustSteps is the most patterns that are looked at to try all sets of a
// size: seconds.
const exhaustSteps = 1 << 30

func (p *patterns) exhaust(ctx context.Context, size int, g *goal) (LookSet, bool, error) {
	sets := 1.0
	for i := range size {
		sets = sets * float64(p.looks-i) / float64(i+1)
	}
	if sets < 1 || sets*float64(len(p.words)) > exhaustSteps {
		return LookSet{}, sets < 1, nil
	}
	mates := p.mates(g)
	best := LookSet{Exact: true}
	bestSet := uint64(0)
	var try func(set uint64, from, left int) error
	try = func(set uint64, from, left int) error {
		if left == 0 {
			if n := p.value(set, g, &mates); n > best.Cells {
				best.Cells, bestSet = n, set
			}
			return ctx.Err()
		}
		for i := from; i <= p.looks-left; i++ {
			if err := try(set|1<<i, i+1, left-1); err != nil {
				return err
			}
		}
		return nil
	}
	err := try(0, 0, size)
	for ; bestSet != 0; bestSet &= bestSet - 1 {
		best.Looks = append(best.Looks, bits.TrailingZeros64(bestSet))
	}
	return best, true, err
}

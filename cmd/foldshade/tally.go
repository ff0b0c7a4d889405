package main

import (
	"math"

	"foldshade/dem"
	"foldshade/mask"
)

// The kinds that the summary tells apart: the tens digit of a class code.
const (
	kindNoData       = 0
	kindOpen         = 1
	kindCompressed   = 2
	kindLayover      = 3
	kindShadow       = 4
	kindUndetermined = 5
	kinds            = 6
)

// tallyBlock is the side, in cells, of the blocks that count as of one cell
// size. Cells of a geographic grid shrink towards the pole; over half a block
// of 30 m cells that is less than 0.01 % below 60 degrees of latitude
// (16 * 30 m * tan(60 deg) / 6371 km = 0.013 % at the block's edge, and the
// two halves of a block cancel).
const tallyBlock = 32

// tally sums cells and ground area by kind. The sums are whole numbers, so
// they do not depend on the order in which tiles arrive.
type tally struct {
	cells [kinds]int64
	km2   [kinds]int64 // whole square kilometres
	mm2   [kinds]int64 // and the rest, square millimetres below 1e12
}

// add counts the verdict codes of a window of the grid.
func (t *tally) add(g *dem.Grid, w dem.Window, codes []uint8) {
	for row := w.Row; row < w.Row+w.Rows; {
		nextRow := min((row/tallyBlock+1)*tallyBlock, w.Row+w.Rows)
		for col := w.Col; col < w.Col+w.Cols; {
			nextCol := min((col/tallyBlock+1)*tallyBlock, w.Col+w.Cols)
			t.addBlock(g, row/tallyBlock, col/tallyBlock,
				countKinds(codes, w, dem.Window{Row: row, Col: col, Rows: nextRow - row, Cols: nextCol - col}))
			col = nextCol
		}
		row = nextRow
	}
}

// countKinds counts the kinds of a part of a window of codes.
func countKinds(codes []uint8, w, part dem.Window) (n [kinds]int64) {
	var byCode [256]int64
	for r := part.Row - w.Row; r < part.Row-w.Row+part.Rows; r++ {
		at := r*w.Cols + part.Col - w.Col
		for _, c := range codes[at : at+part.Cols] {
			byCode[c]++
		}
	}
	for code, count := range byCode {
		if kind := mask.Class(code).Kind(); kind < kinds {
			n[kind] += count
		}
	}
	return n
}

// addBlock adds the counts of a part of a block, at the cell size of the
// block's centre.
func (t *tally) addBlock(g *dem.Grid, blockRow, blockCol int, n [kinds]int64) {
	const middle = (tallyBlock - 1) / 2.0
	cell := int64(math.Round(1e6 * cellArea(g, float64(blockRow*tallyBlock)+middle, float64(blockCol*tallyBlock)+middle)))
	for k, count := range n {
		if count == 0 {
			continue
		}
		t.cells[k] += count
		// A cell of 50 km a side is 2.5e15 mm2, a block of them 2.6e18: in
		// range of an int64.
		sum := t.mm2[k] + count*cell
		t.km2[k] += sum / 1e12
		t.mm2[k] = sum % 1e12
	}
}

// cellArea returns the ground area of a cell, square metres.
func cellArea(g *dem.Grid, row, col float64) float64 {
	p := g.At(row, col)
	return math.Abs(p.ColE*p.RowN - p.ColN*p.RowE)
}

// area returns the ground area of a kind, square kilometres.
func (t *tally) area(kind int) float64 { return float64(t.km2[kind]) + float64(t.mm2[kind])/1e12 }

// total returns the ground area of all cells with a class, no data left out.
func (t *tally) total() float64 {
	sum := 0.0
	for k := kindOpen; k < kinds; k++ {
		sum += t.area(k)
	}
	return sum
}

// share returns the part of the classified area that a kind takes, 0 to 1;
// NaN when no cell has a class.
func (t *tally) share(kind int) float64 { return t.area(kind) / t.total() }

package mask

import "encoding/binary"

// turnBlock is the side of the squares in which arrays are turned, so that what is
// read and what is written both stay in the cache.
const turnBlock = 8

// turnNumbers fills dst, rows x cols, with the transpose of src; with flip the rows
// of src count from its end.
func turnNumbers(dst, src []float32, rows, cols int, flip bool) {
	whole := 0
	if vectors {
		whole = rows / turnBlock * turnBlock
	}
	for c := 0; c < cols; c += turnBlock {
		n := min(turnBlock, cols-c)
		first, step := c*rows, rows // of the row of src that becomes column c
		if flip {
			first, step = (cols-1-c)*rows, -rows
		}
		if n < turnBlock {
			whole = 0
		}
		if whole > 0 {
			turnVectors(dst[c:], src, whole, cols, first, step)
		}
		for j := range n {
			row := src[first+j*step:][:rows]
			for r := whole; r < rows; r++ {
				dst[r*cols+c+j] = row[r]
			}
		}
	}
}

// turnBytes is turnNumbers for bytes.
func turnBytes(dst, src []uint8, rows, cols int, flip bool) {
	whole := rows / turnBlock * turnBlock
	for c := 0; c < cols; c += turnBlock {
		n := min(turnBlock, cols-c)
		first, step := c*rows, rows
		if flip {
			first, step = (cols-1-c)*rows, -rows
		}
		if n < turnBlock {
			whole = 0
		}
		for r := 0; r < whole; r += turnBlock {
			var x [turnBlock]uint64
			for j := range x {
				x[j] = binary.LittleEndian.Uint64(src[first+j*step+r:])
			}
			turnEight(&x)
			for j := range x {
				binary.LittleEndian.PutUint64(dst[(r+j)*cols+c:], x[j])
			}
		}
		for j := range n {
			row := src[first+j*step:][:rows]
			for r := whole; r < rows; r++ {
				dst[r*cols+c+j] = row[r]
			}
		}
	}
}

// turnEight transposes a square of bytes, a row a word: halves of words change
// places, then quarters, then bytes.
func turnEight(x *[turnBlock]uint64) {
	for _, s := range [3]struct {
		apart, shift int
		mask         uint64
	}{{4, 32, 0x00000000ffffffff}, {2, 16, 0x0000ffff0000ffff}, {1, 8, 0x00ff00ff00ff00ff}} {
		for i := range turnBlock {
			if i&s.apart != 0 {
				continue
			}
			a, b := x[i], x[i+s.apart]
			x[i] = a&s.mask | b&s.mask<<s.shift
			x[i+s.apart] = a>>s.shift&s.mask | b&^s.mask
		}
	}
}

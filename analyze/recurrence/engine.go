package recurrence

import (
	"math/bits"
	"sync"
	"sync/atomic"
)

// strip is how many rows are computed before they are scanned together.
const strip = 64

// engine makes the rows of a plot, as bits, and hands them to the tallies. Of a
// plot of one or more series against themselves only columns j ≥ i + band are
// made; band is negative for cross recurrence, which has all of them.
type engine struct {
	n, m   int // rows, columns
	band   int
	opt    Options
	planes []*plane
	words  int // per row; one bit more than columns, so that every line ends
	segRow []uint8
	segCol []uint8
	segs   int
}

// first is the first column of row i that is made.
func (e *engine) first(i int) int {
	if e.band < 0 {
		return 0
	}
	return i + e.band
}

// row fills one row of bits.
func (e *engine) row(i int, row, lohi []uint64) {
	first := e.first(i)
	w0 := min(first/64, e.words)
	clear(row[:w0])
	for w := w0; w < e.words; w++ {
		row[w] = ^uint64(0)
	}
	if first >= e.m {
		clear(row)
		return
	}
	row[w0] <<= first % 64
	row[e.words-1] = 0 // holds no column, or the last ones: the planes' ranks end there
	if e.m%64 != 0 {
		row[e.words-1] = 1<<(e.m%64) - 1
	}
	if w0 == e.words-1 {
		row[w0] &= ^uint64(0) << (first % 64)
	}
	for _, p := range e.planes {
		p.and(i, first, row, lohi)
	}
}

// run makes all rows and fills p. The rows of a strip are made, and the runs
// along them tallied, in parallel; runs down the columns and the diagonals are
// followed from strip to strip in order.
func (e *engine) run(p *Plot) {
	e.words = e.m/64 + 1
	e.segment()
	f := newFollower(e)
	strips := (e.n + strip - 1) / strip
	turn := make([]chan struct{}, strips+1)
	for i := range turn {
		turn[i] = make(chan struct{})
	}
	close(turn[0])
	var next atomic.Int64
	var wg sync.WaitGroup
	workers := make([]*rowTally, max(1, min(e.opt.Workers, strips)))
	for k := range workers {
		workers[k] = newRowTally(e)
		wg.Go(func() {
			t := workers[k]
			buf := make([]uint64, strip*e.words)
			lohi := make([]uint64, 2*e.maxDim())
			for {
				s := int(next.Add(1)) - 1
				if s >= strips {
					return
				}
				from, to := s*strip, min(e.n, (s+1)*strip)
				for i := from; i < to; i++ {
					row := buf[(i-from)*e.words : (i-from+1)*e.words]
					e.row(i, row, lohi)
					t.take(i, row)
				}
				<-turn[s]
				for i := from; i < to; i++ {
					f.take(i, buf[(i-from)*e.words:(i-from+1)*e.words])
				}
				close(turn[s+1])
			}
		})
	}
	wg.Wait()
	f.take(e.n, make([]uint64, e.words)) // an empty row ends every line
	for _, t := range workers {
		f.tally.merge(&t.tally)
	}
	e.finish(p, f, workers)
}

func (e *engine) maxDim() int {
	d := 1
	for _, p := range e.planes {
		d = max(d, p.dim)
	}
	return d
}

// segment divides rows and columns into stretches of time for the jackknife.
func (e *engine) segment() {
	e.segs = max(1, min(24, min(e.n, e.m)/8))
	split := func(n int) []uint8 {
		s := make([]uint8, n)
		for i := range s {
			s[i] = uint8(i * e.segs / n)
		}
		return s
	}
	e.segRow, e.segCol = split(e.n), split(e.m)
}

// lengths counts lines by their length, in all and by the stretch in which the
// middle of their rows or of their columns lies.
type lengths struct {
	all []int64
	seg [][]int32
}

func newLengths(segs int) lengths { return lengths{seg: make([][]int32, segs)} }

func (l *lengths) add(length int, a, b uint8) {
	if length >= len(l.all) {
		l.grow(length)
	}
	l.all[length]++
	l.seg[a][length]++
	if a != b {
		l.seg[b][length]++
	}
}

func (l *lengths) grow(length int) {
	n := max(64, 1<<bits.Len(uint(length)))
	l.all = append(l.all, make([]int64, n-len(l.all))...)
	for i, s := range l.seg {
		l.seg[i] = append(s, make([]int32, n-len(s))...)
	}
}

func (l *lengths) merge(o *lengths) {
	if len(o.all) > len(l.all) {
		l.grow(len(o.all) - 1)
	}
	for i, c := range o.all {
		l.all[i] += c
	}
	for k, s := range o.seg {
		for i, c := range s {
			l.seg[k][i] += c
		}
	}
}

// without is the counts less those of stretch s; s < 0 takes none away.
func (l *lengths) without(s int, buf []int64) []int64 {
	buf = append(buf[:0], l.all...)
	if s >= 0 {
		for i, c := range l.seg[s] {
			buf[i] -= int64(c)
		}
	}
	return buf
}

// tally is what is counted of vertical lines: their lengths and the times between
// them. gap counts, for each two lines that follow one another in a column, the
// distance from the last point of one to the first of the next; back counts the
// distance from first point to first point.
type tally struct {
	vert, gap, back lengths
	points          []int64 // by stretch of rows and of columns
}

func newTally(segs int) tally {
	return tally{newLengths(segs), newLengths(segs), newLengths(segs), make([]int64, segs*segs)}
}

func (t *tally) merge(o *tally) {
	t.vert.merge(&o.vert)
	t.gap.merge(&o.gap)
	t.back.merge(&o.back)
	for i, c := range o.points {
		t.points[i] += c
	}
}

// rowTally counts along rows: points, and, where a row of the upper triangle is
// also a column of the lower one, its vertical lines.
type rowTally struct {
	tally
	e    *engine
	grid *grid
}

func newRowTally(e *engine) *rowTally {
	return &rowTally{tally: newTally(e.segs), e: e, grid: newGrid(e)}
}

func (t *rowTally) take(i int, row []uint64) {
	e := t.e
	w0 := e.first(i) / 64
	if w0 >= len(row) {
		return
	}
	t.count(i, w0, row)
	if t.grid != nil {
		t.grid.take(i, w0, row)
	}
	if e.band < 0 {
		return
	}
	sa := e.segRow[i]
	carry := uint64(0)
	begin, lastBegin, lastEnd := -1, -1, -1
	for w := w0; w < len(row); w++ {
		x := row[w]
		turns := x ^ (x<<1 | carry)
		carry = x >> 63
		for ; turns != 0; turns &= turns - 1 {
			j := 64*w + bits.TrailingZeros64(turns)
			if begin < 0 {
				begin = j
				if lastEnd >= 0 {
					sb := e.segCol[(lastEnd+j)/2]
					t.gap.add(j-lastEnd+1, sa, sb)
					t.back.add(j-lastBegin, sa, sb)
				}
				continue
			}
			t.vert.add(j-begin, sa, e.segCol[(begin+j)/2])
			lastBegin, lastEnd, begin = begin, j, -1
		}
	}
}

// count adds the row's points by stretch of columns.
func (t *rowTally) count(i, w0 int, row []uint64) {
	e := t.e
	at := t.points[int(e.segRow[i])*e.segs:]
	for w := w0; w < len(row); w++ {
		x := row[w]
		if x == 0 {
			continue
		}
		a, b := e.segCol[min(64*w, e.m-1)], e.segCol[min(64*w+63, e.m-1)]
		if a == b {
			at[a] += int64(bits.OnesCount64(x))
			continue
		}
		for ; x != 0; x &= x - 1 {
			at[e.segCol[64*w+bits.TrailingZeros64(x)]]++
		}
	}
}

// follower follows lines down the columns and along the diagonals from row to
// row.
type follower struct {
	tally
	e                *engine
	diag             lengths
	lag              []int64 // points by diagonal
	prev             []uint64
	diagStart        []int32 // row in which the line on a diagonal began
	colStart, colEnd []int32 // row of the latest line's first point, and after its last
	offset           int     // diagonal j − i is at j − i + offset
}

func newFollower(e *engine) *follower {
	f := &follower{tally: newTally(e.segs), e: e, diag: newLengths(e.segs), prev: make([]uint64, e.words)}
	n := e.m + 1
	if e.band < 0 {
		f.offset = e.n
		n = e.n + e.m + 1
	}
	f.lag, f.diagStart = make([]int64, n), make([]int32, n)
	f.colStart, f.colEnd = make([]int32, e.m), make([]int32, e.m)
	for j := range f.colStart {
		f.colStart[j] = -1
	}
	return f
}

func (f *follower) take(i int, row []uint64) {
	e := f.e
	carry := uint64(0)
	for w := min(e.first(max(i-1, 0))/64, e.words); w < e.words; w++ {
		cur, prev := row[w], f.prev[w]
		shifted := prev<<1 | carry
		carry = prev >> 63
		for x := prev &^ cur; x != 0; x &= x - 1 {
			j := 64*w + bits.TrailingZeros64(x)
			start := int(f.colStart[j])
			f.vert.add(i-start, e.segRow[(start+i)/2], e.segCol[j])
			f.colEnd[j] = int32(i)
		}
		for x := cur &^ prev; x != 0; x &= x - 1 {
			j := 64*w + bits.TrailingZeros64(x)
			if start := int(f.colStart[j]); start >= 0 {
				end := int(f.colEnd[j])
				s := e.segRow[(end+i)/2]
				f.gap.add(i-end+1, s, e.segCol[j])
				f.back.add(i-start, s, e.segCol[j])
			}
			f.colStart[j] = int32(i)
		}
		for x := shifted &^ cur; x != 0; x &= x - 1 {
			j := 64*w + bits.TrailingZeros64(x)
			d := j - i + f.offset
			start := int(f.diagStart[d])
			half := (i - start + 1) / 2
			f.diag.add(i-start, e.segRow[i-half], e.segCol[j-half])
			f.lag[d] += int64(i - start)
		}
		for x := cur &^ shifted; x != 0; x &= x - 1 {
			f.diagStart[64*w+bits.TrailingZeros64(x)-i+f.offset] = int32(i)
		}
	}
	copy(f.prev, row)
}

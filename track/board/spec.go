// Package board draws the printed scale target and finds it in a picture. What
// comes in: upright frames of a clip as bytes, and the target's name from the
// rig. What goes out: a camera.Sighting, places in pixels of the upright picture
// (middle of the top-left pixel at (0, 0)) with covariances in px², and places on
// the print in metres; and the target as SVG or PDF, true to size.
//
// The target is a chequered board, an odd number of squares wide and an even
// number high, so that its two upper corners are black and its lower ones white:
// however it is turned in the picture, which way is up can be seen. A crossing of
// four squares looks the same from both sides, so neither blur nor perspective
// shifts it. It is found without OpenCV: ring responses (ChESS: S. Bennett and
// J. Lasenby, Computer Vision and Image Understanding 118 (2014) 197) give the
// crossings roughly, a fitted picture of two blurred edges gives each to a few
// hundredths of a pixel with its covariance, and their edges' directions lead
// from one to the next.
package board

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Spec is a target's geometry.
type Spec struct {
	Cols, Rows int     // squares: an odd number across, an even number down
	SquareM    float64 // side of a square, m
}

// BarM is the nominal length of the bar on every print that is measured with a
// ruler to check the printer, m.
const BarM = 0.1

const (
	leastCols, leastRows = 5, 4
	mostSquares          = 60
)

// Name is how the rig calls the target: "board-9x6-20mm".
func (s Spec) Name() string {
	mm := strconv.FormatFloat(math.Round(s.SquareM*1e6)/1e3, 'f', -1, 64)
	return fmt.Sprintf("board-%dx%d-%smm", s.Cols, s.Rows, mm)
}

// ParseName reads a target's name. The error says what a name looks like.
func ParseName(name string) (Spec, error) {
	var s Spec
	words := strings.Split(name, "-")
	fail := func(why string) (Spec, error) {
		return Spec{}, fmt.Errorf("the target's name %q %s; a name looks like \"board-9x6-20mm\" and is printed on the target", name, why)
	}
	if len(words) != 3 || words[0] != "board" || !strings.HasSuffix(words[2], "mm") {
		return fail("is not one of lodeswing's")
	}
	cols, rows, ok := strings.Cut(words[1], "x")
	var err1, err2, err3 error
	s.Cols, err1 = strconv.Atoi(cols)
	s.Rows, err2 = strconv.Atoi(rows)
	mm, err3 := strconv.ParseFloat(strings.TrimSuffix(words[2], "mm"), 64)
	if !ok || err1 != nil || err2 != nil || err3 != nil {
		return fail("has a number that cannot be read")
	}
	s.SquareM = mm / 1e3
	if err := s.check(); err != nil {
		return fail("is impossible: " + err.Error())
	}
	return s, nil
}

func (s Spec) check() error {
	switch {
	case s.Cols%2 != 1 || s.Rows%2 != 0:
		return fmt.Errorf("it needs an odd number of squares across and an even number down, not %d × %d", s.Cols, s.Rows)
	case s.Cols < leastCols || s.Rows < leastRows || s.Cols > mostSquares || s.Rows > mostSquares:
		return fmt.Errorf("it needs %d × %d to %d × %d squares, not %d × %d", leastCols, leastRows, mostSquares, mostSquares, s.Cols, s.Rows)
	case !(s.SquareM >= 0.5e-3) || s.SquareM > 1:
		return fmt.Errorf("its squares must be 0.5 to 1000 mm wide, not %g mm", s.SquareM*1e3)
	}
	return nil
}

// Black tells whether the square in column c from the left and row r from the
// top is black.
func (s Spec) Black(c, r int) bool { return (c+r)%2 == 0 }

// Crossing gives the place on the print of the crossing right of column p−1 and
// below row q−1 (p = 1 … Cols−1, q = 1 … Rows−1), m from the board's middle, x
// to the right and z up.
func (s Spec) Crossing(p, q int) (x, z float64) {
	return (float64(p) - float64(s.Cols)/2) * s.SquareM, (float64(s.Rows)/2 - float64(q)) * s.SquareM
}

// Package detect finds one bob in one window of a frame and says where its
// centre is and how well that is known. What comes in: an upright patch of
// blue, green, red bytes, a guess, and what the wall behind looks like. What
// goes out: the centre in pixels of the upright picture (pixel centres at
// integers), its 2×2 covariance in px², and how much of the outline was seen.
//
// Search finds candidates anywhere in a patch, coarsely, by colour, darkness,
// lightness or motion. A Fitter then fits the picture of a disc to the pixels
// around the outline: an ellipse with a Gaussian-blurred edge, smeared along
// its motion during the exposure, in front of a wall that is known from other
// frames or locally plane, and lit like a matt ball. Only a band around the
// outline takes part, so that a highlight or a pattern inside does not pull the
// centre. The covariance is that of the weighted fit, scaled by the scatter of
// its own residuals and by how much neighbouring residuals agree (a sandwich
// over sectors of the outline), so that compression noise, which is not white,
// is not taken for white.
package detect

import (
	"image"
	"math"

	"lodeswing/track"
)

// Guess is where a bob is expected, from the frames before.
type Guess struct {
	U, V float64 // px
	// UPos is the standard uncertainty of U and V, px.
	UPos float64
	// SmearU and SmearV are the expected way during the exposure, px.
	SmearU, SmearV float64
	// USmear is the standard uncertainty of the smear's length, px; 0 holds the
	// length, and a length that is free needs a direction.
	USmear float64
	// Skew is how a rolling shutter distorts the outline: row 0 is how far the bob
	// moves along u while the sensor goes on by one pixel along u and along v, row
	// 1 the same along v. px/px; zero for a global shutter.
	Skew [2][2]float64
}

// Disc is a round thing of radius R around (U, V), px. It stands for another
// bob that may cover this one, and for places to leave out.
type Disc struct{ U, V, R float64 }

// Fit is what the picture says about a bob. Positions in px of the upright
// picture.
type Fit struct {
	OK   bool
	Why  string // plain words when not OK
	U, V float64
	Cov  track.Cov // px²
	R    float64   // mean radius, px
	UR   float64   // its standard uncertainty
	// Smear is the length of the way during the exposure along the guess's
	// direction, px, and USmear its uncertainty (0: it was held).
	Smear, USmear float64
	Blur          float64 // standard deviation of the edge's blur, px
	UBlur         float64 // its standard uncertainty (0: it was held)
	E1, E2, UE    float64 // ellipse, as in Shape
	Level         float64 // of the bob near its outline, levels of the projection in use
	Contrast      float64 // bob minus wall, same levels
	Noise         float64 // scatter of the residuals, levels of the projection
	Visible       float64 // share of the outline that agrees with the model, 0 to 1
	WallWrong     bool    // the wall's picture does not fit what is around the bob: the camera has moved
	Cut           bool    // the outline reaches the picture's edge
	Pixels        int     // how many took part
	Steps         int     // iterations
}

// sigma returns the geometric mean of the two standard uncertainties, px.
func (f *Fit) sigma() float64 {
	return math.Sqrt(math.Sqrt(math.Max(f.Cov.AA*f.Cov.BB-f.Cov.AB*f.Cov.AB, 0)))
}

// Window returns the rectangle that a Fitter needs around a guess for a bob of
// radius r: the outline, its smear and a margin of wall.
func Window(g Guess, r float64) image.Rectangle {
	m := r + 8 + math.Min(4*g.UPos, 0.5*r+8)
	du := m + math.Abs(g.SmearU)/2
	dv := m + math.Abs(g.SmearV)/2
	return image.Rect(
		int(math.Floor(g.U-du)), int(math.Floor(g.V-dv)),
		int(math.Ceil(g.U+du))+1, int(math.Ceil(g.V+dv))+1)
}

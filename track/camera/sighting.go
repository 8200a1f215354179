package camera

import "lodeswing/track"

// Sighting is what track/board (or whoever finds two marks) saw of the scale
// in a picture: either the points of a printed target or the two ends of a
// known length.
type Sighting struct {
	Target string  // the printed target's name
	Points []Point // of the printed target; nil for a length
	BarM   float64 // printed target: nominal length of the bar that is measured to check the print, m
	// UVertical is how well the target's up is vertical, rad; 0: 0.5° (common
	// practice, no source: hung by eye against its plumb arrow).
	UVertical float64
	Ends      *Ends // the two ends of the rig's length; nil for a printed target
}

// Point is one point of a printed target: where it was seen, pixel centres at
// integers, and where it is on the print, m, X to the right and Z up.
type Point struct {
	U, V  float64
	Pixel track.Cov // px²
	X, Z  float64
}

// Ends are the two ends of a known length as they were found.
type Ends struct {
	At    [2][2]float64 // px
	Pixel [2]track.Cov  // px²
}

// Package clip opens a clip: what the container says about it, its frames, and
// each frame's true time. What comes in: a video file (mp4, mov, mkv, webm,
// avi) or a folder of numbered pictures. What goes out: Facts, and Frames as
// plain bytes with stride, turn and time, so that nobody else needs OpenCV.
// Units: seconds since the first frame with slow motion undone, pixels, bits/s.
//
// Pixel coordinates are those of the upright picture: u to the right, v down,
// and pixel centres at integers, so (0, 0) is the middle of the top-left pixel.
//
// Facts and times come from ffprobe, pixels from OpenCV, which is built in only
// with the build tags that the Makefile sets. Frames can also be made in plain
// Go, by the film maker and by tests.
package clip

import (
	"context"
	"errors"
	"image"
)

// ErrNoOpenCV is returned where a program that was built without OpenCV is
// asked to decode a video file.
var ErrNoOpenCV = errors.New("built without OpenCV; use make")

// Facts is what is known about a clip before its pixels are read. It goes into
// a result's run.json.
type Facts struct {
	Path        string `json:"path"`
	Container   string `json:"container"` // as ffprobe names it; "numbered pictures" for a folder
	Codec       string `json:"codec"`
	Profile     string `json:"profile,omitempty"`
	PixelFormat string `json:"pixel_format"`
	ColourSpace string `json:"colour_space,omitempty"` // matrix as the container names it: bt709, smpte170m …
	ColourRange string `json:"colour_range,omitempty"` // tv (16–235) or pc (0–255)
	Transfer    string `json:"transfer,omitempty"`     // transfer curve: bt709, arib-std-b67 (HLG), smpte2084 (PQ) …

	StoredW     int `json:"stored_width_px"`
	StoredH     int `json:"stored_height_px"`
	W           int `json:"width_px"` // upright
	H           int `json:"height_px"`
	RotationDeg int `json:"rotation_deg"` // clockwise turn that makes the stored picture upright: 0, 90, 180, 270

	NominalRate float64 `json:"nominal_rate_per_s"` // the container's own, frames per played second
	TrueRate    float64 `json:"true_rate_per_s"`    // frames delivered per real second, slow motion undone
	RateFactor  float64 `json:"rate_factor"`        // recorded frames/s over played frames/s, as the rig says; 1 when it does not
	CaptureFPS  float64 `json:"capture_rate_per_s"` // the capture rate that the phone's tags claim; 0 when they are silent

	Times     []float64    `json:"-"` // s since the first frame, ascending, slow motion undone
	DurationS float64      `json:"duration_s"`
	JitterS   float64      `json:"jitter_s"` // r.m.s. deviation of single frame intervals from their median
	Lost      []LostFrames `json:"lost_frames,omitempty"`

	BitRate  float64           `json:"bit_rate_per_s"` // of the video stream, per played second
	Tags     map[string]string `json:"tags,omitempty"` // container's and stream's tags
	Encoder  string            `json:"encoder,omitempty"`
	SHA256   string            `json:"sha256"`
	Numbered bool              `json:"numbered,omitempty"`
	Warnings []string          `json:"warnings,omitempty"` // plain sentences

	absolute   string    // the path from the root, so that no name can be taken for a protocol
	pictures   []string  // numbered pictures: their files in order
	pts        []float64 // played seconds, as the container gives them, ascending
	start      float64   // the stream's own start time, played seconds
	keys       []float64 // played seconds of the frames that need no other to be decoded, ascending
	interlaced bool
	cut        string // plain words, where the container promises more than the file holds
	inOrder    bool   // the container lists no presentation times (avi): frames are known by their order alone
}

// LostFrames is a hole in the clip's times that whole frames would fill.
type LostFrames struct {
	AfterIndex int     `json:"after_index"` // index of the last frame before the hole
	Count      int     `json:"count"`
	T          float64 `json:"t_s"` // time of that last frame
}

// LostCount returns how many frames are missing in all.
func (f *Facts) LostCount() int {
	n := 0
	for _, l := range f.Lost {
		n += l.Count
	}
	return n
}

// Bounds returns the upright picture's rectangle.
func (f *Facts) Bounds() image.Rectangle { return image.Rect(0, 0, f.W, f.H) }

// Options says what the container cannot know.
type Options struct {
	// RateFactor is recorded frames/s over played frames/s; 0 means 1.
	RateFactor float64
	// FramesPerS is the rate of a folder of numbered pictures; a video file
	// brings its own times and ignores it.
	FramesPerS float64
}

// Source delivers a clip's frames in order of time.
type Source interface {
	// Next returns the next frame, or io.EOF after the last. The frame and its
	// bytes are valid until the next call. Other errors are ctx's own, or plain
	// words about a picture that cannot be read.
	Next(ctx context.Context) (*Frame, error)
	// Facts returns what was known when the clip was opened.
	Facts() *Facts
	// Damage tells, after the last frame, where a clip broke: the time in
	// seconds of the last frame that could be read, and plain words. brokeAt is
	// NaN and words empty while nothing is known to be broken.
	Damage() (brokeAt float64, words string)
	// Close releases the file. It may be called twice.
	Close() error
}

// Open opens the clip that facts (from Inspect) describe.
func Open(ctx context.Context, facts *Facts) (Source, error) {
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	if facts == nil {
		return nil, errors.New("clip: no facts given; call Inspect first")
	}
	if len(facts.pts) == 0 || len(facts.pts) != len(facts.Times) {
		return nil, errors.New("clip: these facts are not from Inspect; call it first")
	}
	if facts.Numbered {
		return openPictures(facts)
	}
	return openVideo(facts)
}

//go:build gocv_specific_modules && gocv_videoio

package clip

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"sort"
	"sync"

	"gocv.io/x/gocv"
)

// orientationAuto is OpenCV's CAP_PROP_ORIENTATION_AUTO, which gocv does not
// name. It must be off: clips flagged 90° or 270° come out upside down with it.
const orientationAuto gocv.VideoCaptureProperties = 49

// quiet keeps OpenCV's FFmpeg from following playlists in disguise and from
// writing to the terminal. Both are read when a file is opened.
var quiet = sync.OnceValue(func() error {
	if err := os.Setenv("OPENCV_FFMPEG_CAPTURE_OPTIONS", "format_whitelist;"+formats); err != nil {
		return err
	}
	return os.Setenv("OPENCV_FFMPEG_LOGLEVEL", "-8")
})

// videoSource reads a video file through OpenCV. The Mat is used here alone and
// never after it is closed.
type videoSource struct {
	facts  *Facts
	video  *gocv.VideoCapture
	mat    gocv.Mat
	frame  Frame
	last   int // index of the last frame delivered, −1 before the first
	missed int // frames listed before the last delivered one that never came
	at     float64
	broke  string
	ended  bool
	closed bool
}

func openVideo(f *Facts) (Source, error) {
	if err := quiet(); err != nil {
		return nil, fmt.Errorf("clip %s: the decoder cannot be made safe (%v)", f.Path, err)
	}
	video, err := gocv.VideoCaptureFileWithAPI(f.absolute, gocv.VideoCaptureFFmpeg)
	if err != nil || !video.IsOpened() {
		if video != nil {
			video.Close()
		}
		return nil, fmt.Errorf("clip %s cannot be decoded (%s, %s); play it on a computer to see whether it is whole, or convert it to H.264", f.Path, f.Codec, f.PixelFormat)
	}
	video.Set(orientationAuto, 0)
	return &videoSource{
		facts: f, video: video, mat: gocv.NewMat(), last: -1, at: math.NaN(),
	}, nil
}

func (s *videoSource) Next(ctx context.Context) (*Frame, error) {
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	if s.closed {
		return nil, fmt.Errorf("clip %s was closed", s.facts.Path)
	}
	if s.ended {
		return nil, io.EOF
	}
	if !s.video.Read(&s.mat) || s.mat.Empty() {
		return nil, s.end()
	}
	at := s.place(s.video.Get(gocv.VideoCapturePosMsec) / 1000)
	if at >= len(s.facts.Times) {
		s.ended = true // the decoder invents frames that the container does not list
		return nil, io.EOF
	}
	w, h := s.mat.Cols(), s.mat.Rows()
	if w != s.facts.StoredW || h != s.facts.StoredH || s.mat.Type() != gocv.MatTypeCV8UC3 {
		return nil, fmt.Errorf("clip %s: frame %d is %d × %d pixels where the container says %d × %d; export it again with one size", s.facts.Path, at, w, h, s.facts.StoredW, s.facts.StoredH)
	}
	pix, err := s.mat.DataPtrUint8()
	if err != nil {
		return nil, fmt.Errorf("clip %s: frame %d: %v", s.facts.Path, at, err)
	}
	s.missed += at - s.last - 1
	s.last = at
	s.frame = Frame{Index: at, T: s.facts.Times[at], Pix: pix, W: w, H: h, Stride: 3 * w, RotationDeg: s.facts.RotationDeg}
	return &s.frame, nil
}

// place finds which listed frame was decoded. OpenCV tells each frame's time
// from the stream's start, except for the last one or two of reordered streams,
// where it tells 0; there, and wherever the time fits no listed one, the next in
// order is taken.
func (s *videoSource) place(played float64) int {
	next := s.last + 1
	pts := s.facts.pts
	if next >= len(pts) || played <= 0 {
		return next
	}
	t := played + s.facts.start
	const near = 1e-3 // OpenCV's times are right to 0.02 ms; frames are 1 ms apart or more
	if math.Abs(pts[next]-t) < near {
		return next
	}
	i := next + sort.SearchFloat64s(pts[next:], t-near)
	if i < len(pts) && math.Abs(pts[i]-t) < near {
		return i
	}
	return next
}

// end notes whether all listed frames came.
func (s *videoSource) end() error {
	s.ended = true
	f, n := s.facts, len(s.facts.Times)
	switch {
	case s.last < 0:
		return fmt.Errorf("clip %s: none of its %d frames can be decoded (%s); it is damaged: copy it from the phone again", f.Path, n, f.Codec)
	case s.last < n-1:
		s.at = f.Times[s.last]
		s.broke = fmt.Sprintf("The clip breaks off after frame %d of %d, at %.3f s of %.3f s: the rest cannot be decoded. It was measured as far as it goes; copy it from the phone again.", s.last+1, n, s.at, f.DurationS)
	case s.missed > 0:
		s.at = f.Times[s.last]
		s.broke = fmt.Sprintf("%d of the clip's %d frames cannot be decoded; the others were measured. Copy it from the phone again.", s.missed, n)
	}
	return io.EOF
}

func (s *videoSource) Facts() *Facts             { return s.facts }
func (s *videoSource) Damage() (float64, string) { return s.at, s.broke }

func (s *videoSource) Close() error {
	if s.closed {
		return nil
	}
	s.closed, s.frame.Pix = true, nil
	return errors.Join(s.mat.Close(), s.video.Close())
}

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

// videoSource reads a video file through OpenCV. It decodes one picture ahead, so
// that decoding and colour conversion go on while the caller works on the last one.
// The Mats are used here alone and never after they are closed.
type videoSource struct {
	facts  *Facts
	video  *gocv.VideoCapture
	mats   [2]gocv.Mat
	shown  int          // which of mats the last delivered frame lies in
	ahead  chan decoded // the picture that is being decoded into the other one; nil: none
	frame  Frame
	placed int   // index of the last frame decoded, −1 before the first
	last   int   // index of the last frame delivered, −1 before the first
	holes  []gap // stretches of listed frames that could not be delivered
	ended  bool
	closed bool
}

// decoded is what came of asking for a picture.
type decoded struct {
	ok, failed bool
	played     float64 // its time as OpenCV tells it, s
}

// gap is a stretch of frames, from index first to before index end.
type gap struct{ first, end int }

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
		facts: f, video: video, mats: [2]gocv.Mat{gocv.NewMat(), gocv.NewMat()}, placed: -1, last: -1,
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
	// After a break the decoder goes on with pictures patched from wrong ones,
	// up to the next frame that needs no other: those are not delivered.
	broken := false
	for {
		if s.ahead == nil {
			s.ask()
		}
		var got decoded
		select {
		case got = <-s.ahead:
		case <-ctx.Done():
			return nil, ctx.Err()
		}
		s.ahead = nil
		if !got.ok {
			return nil, s.end()
		}
		s.shown = 1 - s.shown
		at := s.place(got.played)
		if at >= len(s.facts.Times) { // the decoder invents frames that the container does not list
			return nil, s.end()
		}
		broken = broken || got.failed || at > s.placed+1
		s.placed = at
		if !broken || s.isKey(at) {
			frame, err := s.deliver(at)
			if err == nil {
				s.ask()
			}
			return frame, err
		}
	}
}

// ask has the next picture decoded into the Mat that is not shown. Until its answer
// has come through s.ahead nothing else may use the video.
func (s *videoSource) ask() {
	due := len(s.facts.Times) - 1 - s.placed
	answer, into := make(chan decoded, 1), &s.mats[1-s.shown]
	s.ahead = answer
	go func() {
		got := read(s.video, into, due)
		if got.ok {
			got.played = s.video.Get(gocv.VideoCapturePosMsec) / 1000
		}
		answer <- got
	}()
}

// read decodes the next picture into the Mat. OpenCV says no at a damaged
// packet just as at the end of the file, so while frames are due it is asked
// again, a limited number of times; failed tells that it had said no.
func read(video *gocv.VideoCapture, into *gocv.Mat, due int) decoded {
	for try := 0; try <= min(due, 1000); try++ {
		if video.Read(into) && !into.Empty() {
			return decoded{ok: true, failed: try > 0}
		}
	}
	return decoded{failed: true}
}

// deliver hands out the decoded picture as frame at.
func (s *videoSource) deliver(at int) (*Frame, error) {
	mat := &s.mats[s.shown]
	w, h := mat.Cols(), mat.Rows()
	if w != s.facts.StoredW || h != s.facts.StoredH || mat.Type() != gocv.MatTypeCV8UC3 {
		return nil, fmt.Errorf("clip %s: frame %d is %d × %d pixels where the container says %d × %d; export it again with one size", s.facts.Path, at, w, h, s.facts.StoredW, s.facts.StoredH)
	}
	pix, err := mat.DataPtrUint8()
	if err != nil {
		return nil, fmt.Errorf("clip %s: frame %d: %v", s.facts.Path, at, err)
	}
	if at > s.last+1 {
		s.holes = append(s.holes, gap{s.last + 1, at})
	}
	s.last = at
	s.frame = Frame{Index: at, T: s.facts.Times[at], Pix: pix, W: w, H: h, Stride: 3 * w, RotationDeg: s.facts.RotationDeg}
	return &s.frame, nil
}

// place finds which listed frame was decoded. OpenCV tells each frame's time
// from the stream's start, except for the last one or two of reordered streams,
// where it tells 0; there, and wherever the time fits no listed one, the next in
// order is taken.
func (s *videoSource) place(played float64) int {
	next := s.placed + 1
	pts := s.facts.pts
	if next >= len(pts) || played <= 0 || s.facts.inOrder {
		return next
	}
	t := played + s.facts.start
	const near = 5e-4 // OpenCV's times are right to 0.02 ms
	if math.Abs(pts[next]-t) < near {
		return next
	}
	i := next + sort.SearchFloat64s(pts[next:], t-near)
	if i < len(pts) && math.Abs(pts[i]-t) < near {
		return i
	}
	return next
}

// isKey tells whether the frame needs no other to be decoded.
func (s *videoSource) isKey(at int) bool {
	k, t := s.facts.keys, s.facts.pts[at]
	if len(k) == 0 {
		return true // the container does not tell
	}
	i := sort.SearchFloat64s(k, t)
	return i < len(k) && k[i] == t
}

// end notes the frames that are due and will not come.
func (s *videoSource) end() error {
	s.ended = true
	f, n := s.facts, len(s.facts.Times)
	if s.last < 0 {
		return fmt.Errorf("clip %s: none of its %d frames can be decoded (%s); it is damaged: copy it from the phone again", f.Path, n, f.Codec)
	}
	if s.last < n-1 {
		s.holes = append(s.holes, gap{s.last + 1, n})
	}
	return io.EOF
}

// Damage tells of the listed frames that did not come.
func (s *videoSource) Damage() (float64, string) {
	f, n := s.facts, len(s.facts.Times)
	switch {
	case len(s.holes) == 0 && f.cut == "":
		return math.NaN(), ""
	case len(s.holes) == 0 || f.cut != "" && s.holes[0].end == n && n-s.holes[0].first <= 3:
		// At a cut the last packets may be halves that cannot be decoded.
		at := n - 1
		if len(s.holes) > 0 {
			at = max(s.holes[0].first-1, 0)
		}
		return f.Times[at], f.cut
	}
	first := s.holes[0]
	at := f.Times[max(first.first-1, 0)]
	if first.end == n {
		return at, fmt.Sprintf("The clip breaks off after frame %d of %d, at %.3f s of %.3f s: the rest cannot be decoded. It was measured as far as it goes; copy it from the phone again.", first.first, n, at, f.DurationS)
	}
	missing := 0
	for _, h := range s.holes {
		missing += h.end - h.first
	}
	words := fmt.Sprintf("The clip is damaged after frame %d of %d, at %.3f s: %d frames cannot be decoded", first.first, n, at, missing)
	if last := s.holes[len(s.holes)-1]; last.end == n {
		words += fmt.Sprintf(", and it breaks off at %.3f s", f.Times[last.first-1])
	}
	return at, words + ". The others were measured; copy it from the phone again."
}

func (s *videoSource) Facts() *Facts { return s.facts }

func (s *videoSource) Close() error {
	if s.closed {
		return nil
	}
	s.closed, s.frame.Pix = true, nil
	if s.ahead != nil {
		<-s.ahead
	}
	return errors.Join(s.mats[0].Close(), s.mats[1].Close(), s.video.Close())
}

package clip

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"os/exec"
	"sort"
	"strconv"
	"strings"
	"unicode/utf8"
)

// formats are the demuxers that a clip may use, here and in OpenCV. Anything
// else, above all a playlist that names other files, is refused.
const formats = "mov,mp4,m4a,3gp,3g2,mj2,matroska,webm,avi"

// probed is what ffprobe prints.
type probed struct {
	Streams []struct {
		Index       int               `json:"index"`
		CodecName   string            `json:"codec_name"`
		Profile     string            `json:"profile"`
		CodecType   string            `json:"codec_type"`
		Width       int               `json:"width"`
		Height      int               `json:"height"`
		PixFmt      string            `json:"pix_fmt"`
		ColorRange  string            `json:"color_range"`
		ColorSpace  string            `json:"color_space"`
		Transfer    string            `json:"color_transfer"`
		FieldOrder  string            `json:"field_order"`
		RFrameRate  string            `json:"r_frame_rate"`
		AvgRate     string            `json:"avg_frame_rate"`
		TimeBase    string            `json:"time_base"`
		StartPTS    *int64            `json:"start_pts"`
		BitRate     string            `json:"bit_rate"`
		Duration    string            `json:"duration"`
		NbFrames    string            `json:"nb_frames"`
		Aspect      string            `json:"sample_aspect_ratio"`
		Tags        map[string]string `json:"tags"`
		Disposition struct {
			AttachedPic int `json:"attached_pic"`
		} `json:"disposition"`
		SideData []struct {
			Type     string  `json:"side_data_type"`
			Matrix   string  `json:"displaymatrix"`
			Rotation float64 `json:"rotation"`
		} `json:"side_data_list"`
	} `json:"streams"`
	Format struct {
		Name    string            `json:"format_name"`
		BitRate string            `json:"bit_rate"`
		Tags    map[string]string `json:"tags"`
	} `json:"format"`
	Packets []struct {
		Stream int    `json:"stream_index"`
		PTS    *int64 `json:"pts"`
		DTS    *int64 `json:"dts"`
		Size   string `json:"size"`
		Flags  string `json:"flags"`
	} `json:"packets"`
}

// readContainer fills f from ffprobe. Packet times without the discard flag,
// sorted, are the decoded frames' times for every intact mp4, mkv, webm and avi
// (checked in times_test.go), and take a twentieth of the time that decoding
// would.
func (f *Facts) readContainer(ctx context.Context) error {
	out, err := runProbe(ctx, f.absolute, "-show_entries",
		"stream=index,codec_name,profile,codec_type,width,height,pix_fmt,color_range,color_space,color_transfer,field_order,r_frame_rate,avg_frame_rate,time_base,start_pts,bit_rate,duration,nb_frames,sample_aspect_ratio:"+
			"stream_tags:stream_disposition=attached_pic:stream_side_data=side_data_type,displaymatrix,rotation:"+
			"format=format_name,bit_rate:format_tags:packet=stream_index,pts,dts,size,flags",
		"-select_streams", "v")
	if err != nil {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		return f.plainProbeError(err)
	}
	var p probed
	if err := json.Unmarshal(out, &p); err != nil {
		return fmt.Errorf("clip %s: ffprobe's answer cannot be understood (%v); check that ffprobe works: ffprobe %s", f.Path, err, f.Path)
	}
	at := -1
	for i, s := range p.Streams {
		if s.CodecType == "video" && s.Disposition.AttachedPic == 0 {
			at = i
			break
		}
	}
	if at < 0 {
		if out, err := runProbe(ctx, f.absolute, "-show_entries", "stream=codec_type"); err == nil && bytes.Contains(out, []byte(`"audio"`)) {
			return fmt.Errorf("clip %s holds sound but no moving pictures; give the video itself", f.Path)
		}
		return f.noFrames()
	}
	s := p.Streams[at]
	f.Container, f.Codec, f.Profile, f.PixelFormat = p.Format.Name, s.CodecName, s.Profile, s.PixFmt
	f.ColourSpace, f.ColourRange, f.Transfer = s.ColorSpace, s.ColorRange, s.Transfer
	f.interlaced = s.FieldOrder != "" && s.FieldOrder != "progressive" && s.FieldOrder != "unknown"
	f.StoredW, f.StoredH = s.Width, s.Height
	f.NominalRate = ratio(s.RFrameRate)
	for k, v := range p.Format.Tags {
		f.Tags[k] = v
	}
	for k, v := range s.Tags {
		if _, taken := f.Tags[k]; !taken {
			f.Tags[k] = v
		}
	}
	f.Encoder = firstTag(f.Tags, "encoder", "com.apple.quicktime.software", "software", "writing_application")
	if s.Tags["encoder"] != "" {
		f.Encoder = s.Tags["encoder"]
	}
	f.CaptureFPS = captureRate(f.Tags)
	turn := 0.0
	for _, d := range s.SideData {
		if d.Matrix == "" && d.Rotation == 0 {
			continue
		}
		turn = -d.Rotation
		if mirrored(d.Matrix) {
			f.Warnings = append(f.Warnings, mirrorWarning)
		}
	}
	if len(s.SideData) == 0 && s.Tags["rotate"] != "" {
		turn, _ = strconv.ParseFloat(s.Tags["rotate"], 64)
	}
	quarter := math.Round(turn / 90)
	if math.Abs(turn-90*quarter) > 1 {
		f.Warnings = append(f.Warnings, fmt.Sprintf("The clip is flagged as turned by %g°, which is no quarter turn; it is measured turned by %g°.", turn, 90*quarter))
	}
	f.RotationDeg = ((int(quarter)*90)%360 + 360) % 360
	f.W, f.H = f.StoredW, f.StoredH
	if f.RotationDeg%180 == 90 {
		f.W, f.H = f.H, f.W
	}
	if s.Aspect != "" && s.Aspect != "1:1" && s.Aspect != "0:1" && s.Aspect != "N/A" {
		f.Warnings = append(f.Warnings, fmt.Sprintf("The clip's pixels are not square (%s): lengths across and along differ. Export it with square pixels, or use the file straight from the phone.", s.Aspect))
	}
	if f.StoredW <= 0 || f.StoredH <= 0 {
		return fmt.Errorf("clip %s says nothing about its picture size; it is damaged: copy it from the phone again", f.Path)
	}

	base := ratio(s.TimeBase)
	bytesIn := 0.0
	listed, first, last := 0, math.Inf(1), math.Inf(-1)
	for _, pk := range p.Packets {
		if pk.Stream != s.Index {
			continue
		}
		at := pk.PTS
		if at == nil {
			at, f.inOrder = pk.DTS, true
		}
		if at == nil {
			continue
		}
		listed++
		first, last = math.Min(first, float64(*at)*base), math.Max(last, float64(*at)*base)
		if strings.Contains(pk.Flags, "D") {
			continue // an edit list hides it
		}
		size, _ := strconv.ParseFloat(pk.Size, 64)
		bytesIn += size
		f.pts = append(f.pts, float64(*at)*base)
		if strings.Contains(pk.Flags, "K") {
			f.keys = append(f.keys, float64(*at)*base)
		}
	}
	if len(f.pts) == 0 {
		return f.noFrames()
	}
	sort.Float64s(f.pts)
	sort.Float64s(f.keys)
	if s.StartPTS != nil {
		f.start = float64(*s.StartPTS) * base
	} else {
		f.start = f.pts[0]
	}
	if span := f.pts[len(f.pts)-1] - f.pts[0]; span > 0 {
		n := float64(len(f.pts))
		f.BitRate = 8 * bytesIn / (span * n / (n - 1))
	}
	if listed > 1 {
		f.noteCut(s.NbFrames, s.Duration, firstTag(s.Tags, "DURATION"), listed, first, last)
	}
	f.SHA256, err = hashFiles(ctx, f.absolute)
	return err
}

// noteCut compares what the container promises with the listed packets, hidden
// ones included: a copy that was cut short has lost its end. An mp4 or avi says
// how many frames it should have, a Matroska for how long it should run.
func (f *Facts) noteCut(count, duration, tag string, listed int, first, last float64) {
	span := last - first
	step := span / float64(listed-1)
	promised, _ := strconv.ParseFloat(duration, 64)
	if promised == 0 {
		promised = clock(tag) - first // it counts from 0, not from the first frame
	}
	n, _ := strconv.Atoi(count)
	if f.Container == "avi" {
		promised = float64(n) * step
	}
	if n > 0 && n <= listed || promised-span-step < math.Max(0.3, 4*step) {
		return
	}
	f.cut = fmt.Sprintf("The file ends after %.2f s of %.2f s that it promises (as it plays): the recording or the copy was cut short. It was measured as far as it goes; copy it from the phone again.", span+step, promised)
}

// clock reads "00:00:04.000000000" as seconds; 0 where it cannot.
func clock(s string) float64 {
	parts := strings.Split(s, ":")
	if len(parts) != 3 {
		return 0
	}
	sum := 0.0
	for _, p := range parts {
		v, err := strconv.ParseFloat(p, 64)
		if err != nil {
			return 0
		}
		sum = 60*sum + v
	}
	return sum
}

func (f *Facts) noFrames() error {
	return fmt.Errorf("clip %s holds no frames: the recording stopped before the first one, or the copy failed; film or copy it again", f.Path)
}

// runProbe runs ffprobe on a file with every door closed but the file itself.
func runProbe(ctx context.Context, path string, args ...string) ([]byte, error) {
	args = append([]string{"-v", "error", "-hide_banner", "-protocol_whitelist", "file", "-format_whitelist", formats, "-of", "json"}, args...)
	cmd := exec.CommandContext(ctx, "ffprobe", append(args, "-i", path)...)
	var out, errs bytes.Buffer
	cmd.Stdout, cmd.Stderr = &out, &errs
	if err := cmd.Run(); err != nil {
		if errors.Is(err, exec.ErrNotFound) {
			return nil, errNoProbe
		}
		return nil, fmt.Errorf("%s", lastLine(errs.String(), err))
	}
	return out.Bytes(), nil
}

var errNoProbe = errors.New("ffprobe is not installed or not on the PATH; install ffmpeg (Debian: apt-get install ffmpeg)")

// plainProbeError says in plain words why ffprobe refused the file.
func (f *Facts) plainProbeError(err error) error {
	if errors.Is(err, errNoProbe) {
		return fmt.Errorf("clip %s cannot be read: %w", f.Path, err)
	}
	words := err.Error()
	switch {
	case looksLikeText(f.absolute):
		return fmt.Errorf("clip %s is text, not a video (a playlist or a saved web page?); give the video file itself", f.Path)
	case strings.Contains(words, "moov atom not found"):
		return fmt.Errorf("clip %s has no index: the recording or the copy was cut short, so no frame can be found in it; copy it from the phone again, or film again", f.Path)
	case strings.Contains(words, "whitelist"), strings.Contains(words, "Invalid data"):
		return fmt.Errorf("clip %s is not a video that can be read here (mp4, mov, mkv, webm or avi), or its beginning is damaged; give the file straight from the phone", f.Path)
	}
	return fmt.Errorf("clip %s cannot be read (%s); give the file straight from the phone", f.Path, words)
}

// looksLikeText tells whether a file begins with plain text.
func looksLikeText(path string) bool {
	in, err := os.Open(path)
	if err != nil {
		return false
	}
	defer in.Close()
	head := make([]byte, 512)
	n, _ := in.Read(head)
	head = head[:n]
	for len(head) > 0 && len(head) > n-utf8.UTFMax && !utf8.Valid(head) { // a character cut in two at the end
		head = head[:len(head)-1]
	}
	return len(head) > 0 && utf8.Valid(head) && bytes.IndexFunc(head, func(r rune) bool {
		return r < ' ' && r != '\n' && r != '\r' && r != '\t'
	}) < 0
}

func lastLine(text string, err error) string {
	lines := strings.Split(strings.TrimSpace(text), "\n")
	if l := strings.TrimSpace(lines[len(lines)-1]); l != "" {
		return strings.Join(lines, "; ")
	}
	return err.Error()
}

// ratio reads "30000/1001"; 0 where it cannot.
func ratio(s string) float64 {
	num, den, found := strings.Cut(s, "/")
	a, err := strconv.ParseFloat(num, 64)
	if err != nil {
		return 0
	}
	if !found {
		return a
	}
	b, err := strconv.ParseFloat(den, 64)
	if err != nil || b == 0 {
		return 0
	}
	return a / b
}

const mirrorWarning = "The clip is flagged as mirrored (a front camera?). It is measured as stored, so left and right may be exchanged."

// mirrored tells whether ffprobe's print of a display matrix reverses the
// picture: the determinant of its upper left 2 × 2 is negative.
func mirrored(matrix string) bool {
	var m [3][2]float64
	row := 0
	for _, line := range strings.Split(strings.TrimSpace(matrix), "\n") {
		_, numbers, ok := strings.Cut(line, ":")
		fields := strings.Fields(numbers)
		if !ok || len(fields) < 2 || row > 2 {
			continue
		}
		m[row][0], _ = strconv.ParseFloat(fields[0], 64)
		m[row][1], _ = strconv.ParseFloat(fields[1], 64)
		row++
	}
	return row >= 2 && m[0][0]*m[1][1]-m[0][1]*m[1][0] < 0
}

func firstTag(tags map[string]string, keys ...string) string {
	for _, k := range keys {
		for name, v := range tags {
			if strings.EqualFold(name, k) && v != "" {
				return v
			}
		}
	}
	return ""
}

// captureRate returns the frames per second that the phone says it recorded
// with, 0 when no tag tells.
func captureRate(tags map[string]string) float64 {
	v := firstTag(tags, "com.android.capture.fps")
	r := ratio(strings.TrimSpace(v))
	if !(r > 0) || r > 1e5 {
		return 0
	}
	return r
}

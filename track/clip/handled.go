package clip

import (
	"fmt"
	"strings"
)

// Handled is what the container tells about where the clip has been since it
// was filmed.
type Handled struct {
	// FromPhone tells that tags are there which phones write and most programs
	// drop.
	FromPhone bool `json:"from_phone"`
	// Signs are plain phrases, one for each thing that a program between phone
	// and here leaves behind.
	Signs []string `json:"signs,omitempty"`
	// BitsPerPixel is the video's bits per pixel and frame, and Poor that it is
	// so low that fine detail is gone.
	BitsPerPixel float64 `json:"bits_per_pixel"`
	Poor         bool    `json:"poor"`
}

// Reencoded tells whether the clip was very likely encoded anew, by a messenger
// or an upload, and lost detail by it.
func (h Handled) Reencoded() bool {
	return !h.FromPhone && (h.Poor && len(h.Signs) > 0 || len(h.Signs) >= 2)
}

// leastBits is the bits per pixel and frame under which a codec blurs what is
// small and moves: phones write 0.1–0.3 with H.264 and half of that with HEVC
// (common practice, no source).
func leastBits(codec string) float64 {
	switch codec {
	case "h264":
		return 0.06
	case "hevc", "vp9", "av1":
		return 0.03
	case "mjpeg":
		return 0.8
	}
	return 0.06
}

// Handled judges a video file's tags, encoder, size and bitrate. Numbered
// pictures get the zero value.
func (f *Facts) Handled() Handled {
	var h Handled
	if f.Numbered {
		return h
	}
	for k := range f.Tags {
		k = strings.ToLower(k)
		if strings.HasPrefix(k, "com.android.") || strings.HasPrefix(k, "com.apple.quicktime.") ||
			k == "make" || k == "model" || strings.HasPrefix(k, "location") {
			h.FromPhone = true
		}
	}
	sign := func(format string, a ...any) { h.Signs = append(h.Signs, fmt.Sprintf(format, a...)) }
	if e := f.Encoder; strings.Contains(e, "Lavf") || strings.Contains(e, "Lavc") || strings.Contains(e, "x264") || strings.Contains(e, "x265") || strings.Contains(e, "libvpx") {
		sign("it was written by a program (%s), not by a camera", e)
	}
	if name := firstTag(f.Tags, "handler_name"); strings.Contains(strings.ToLower(name), "produced by") {
		sign("its track is labelled %q, as an upload service does", strings.TrimSpace(name))
	}
	if strings.Contains(f.Profile, "Baseline") {
		sign("it uses H.264's %s profile, which messengers choose and phones do not", f.Profile)
	}
	if f.Codec == "vp9" || f.Codec == "av1" {
		sign("phones do not record %s", strings.ToUpper(f.Codec))
	}
	if short := min(f.W, f.H); short > 0 && !usualHeight(short) {
		sign("its size, %d × %d, is none that phones record", f.W, f.H)
	}
	if rate := f.TrueRate / f.RateFactor; rate > 0 && f.W > 0 && f.BitRate > 0 {
		h.BitsPerPixel = f.BitRate / (float64(f.W) * float64(f.H) * rate)
		h.Poor = h.BitsPerPixel < leastBits(f.Codec)
	}
	return h
}

// usualHeight tells whether phones record pictures whose shorter side is n.
func usualHeight(n int) bool {
	for _, u := range []int{480, 720, 960, 1080, 1440, 1512, 1536, 1920, 2160, 2448, 3024, 4320} {
		if n == u {
			return true
		}
	}
	return false
}

// warnOfHandling puts a warning where the clip was very likely encoded anew.
func (f *Facts) warnOfHandling() {
	h := f.Handled()
	if !h.Reencoded() || !h.Poor {
		return
	}
	f.Warnings = append(f.Warnings, fmt.Sprintf(
		"The clip seems to have been encoded anew after filming: %s; and %.2g bits per pixel are few, so edges are smeared and centres less sure. Use the file straight from the phone, by cable or as a document, not through a messenger.",
		strings.Join(h.Signs, "; "), h.BitsPerPixel))
}

// dynamicRange tells whether the clip was filmed in a high dynamic range, which
// is read paler than it looks on the phone.
func (f *Facts) dynamicRange() string {
	switch f.Transfer {
	case "arib-std-b67":
		return "HLG"
	case "smpte2084":
		return "PQ"
	}
	return ""
}

package clip

import (
	"fmt"
	"math"
)

// warn adds what the container's facts alone give reason to doubt.
func (f *Facts) warn() {
	f.warnOfCaptureRate()
	f.warnOfRamp()
	f.warnOfHandling()
	if hdr := f.dynamicRange(); hdr != "" {
		f.Warnings = append(f.Warnings, fmt.Sprintf("The clip was filmed in high dynamic range (%s): colours are read paler than they look on the phone. Switch HDR video off before filming, and take a bob's colour from the result's still.png.", hdr))
	}
	if f.interlaced {
		f.Warnings = append(f.Warnings, "The clip is interlaced: each frame holds two moments, one in the even and one in the odd rows, so moving edges fray. Film with a progressive setting (30p, 60p).")
	}
	if bad := disorder(f.pts); bad > 0 {
		f.Warnings = append(f.Warnings, fmt.Sprintf("%d frames have the same time as the frame before them; the clip was put together or converted badly. Use the file straight from the phone.", bad))
	}
}

// warnOfCaptureRate compares the phone's capture-rate tag with the rig's factor.
func (f *Facts) warnOfCaptureRate() {
	played := f.TrueRate / f.RateFactor
	if !(f.CaptureFPS > 0) || !(played > 0) {
		return
	}
	factor := f.CaptureFPS / played
	if math.Abs(factor/f.RateFactor-1) <= 0.05 {
		return
	}
	f.Warnings = append(f.Warnings, fmt.Sprintf(
		"The phone's tag says that %.4g frames/s were recorded, and the clip plays %.4g frames/s, so rate_factor should be about %.3g; %.3g is in use. Every time, period and rate depends on it.",
		f.CaptureFPS, played, factor, f.RateFactor))
}

// warnOfRamp looks for a rate that changes in the middle, as in an exported
// slow-motion clip whose beginning and end play at normal speed: no single
// rate_factor can undo it.
func (f *Facts) warnOfRamp() {
	const window = 15 // frames that must agree before a change counts
	n := len(f.Times)
	if n < 3*window {
		return
	}
	least, most := math.Inf(1), 0.0
	leastAt, mostAt := 0, 0
	for i := 0; i+window < n; i += window {
		steps := make([]float64, window)
		for k := range steps {
			steps[k] = f.Times[i+k+1] - f.Times[i+k]
		}
		m := median(steps)
		if m < least {
			least, leastAt = m, i
		}
		if m > most {
			most, mostAt = m, i
		}
	}
	if least > 0 && most/least > 1.8 {
		f.Warnings = append(f.Warnings, fmt.Sprintf(
			"The frame rate changes within the clip, from %.4g frames/s near %.2f s to %.4g near %.2f s. Times are taken as the container gives them; if this is a slow-motion clip exported with a ramp, they are wrong: send the original file, or export it without the ramp.",
			1/least, f.Times[leastAt], 1/most, f.Times[mostAt]))
	}
}

// disorder counts times that do not come after the one before.
func disorder(t []float64) int {
	n := 0
	for i := 1; i < len(t); i++ {
		if t[i] <= t[i-1] {
			n++
		}
	}
	return n
}

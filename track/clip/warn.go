package clip

import (
	"fmt"
	"math"
)

// warn adds what the container's facts alone give reason to doubt.
func (f *Facts) warn() {
	if played := f.TrueRate * f.RateFactor; f.CaptureFPS > 0 && played > 0 {
		factor := f.CaptureFPS / (played / 1)
		if played > 0 && math.Abs(factor/f.RateFactor-1) > 0.05 {
			f.Warnings = append(f.Warnings, fmt.Sprintf(
				"The phone's tag says %.4g frames/s were recorded and the clip plays %.4g frames/s, so rate_factor should be about %.4g; %.4g is in use. Every time, period and rate depends on it.",
				f.CaptureFPS, played, factor, f.RateFactor))
		}
	}
}

package shake

import (
	"context"
	"errors"
	"io"

	"lodeswing/track/clip"
	"lodeswing/track/rig"
)

// Look reads the first frames of a clip, at most limit (0: all), and returns
// the survey of its pixels and the report on its background and marks. told, if
// not nil, is called with the number of frames done.
func Look(ctx context.Context, src clip.Source, marks []rig.Mark, limit int, told func(done int)) (*clip.Survey, *Report, error) {
	survey, watch := clip.NewSurveyor(src.Facts()), New(src.Facts(), marks, nil)
	for n := 0; limit == 0 || n < limit; n++ {
		f, err := src.Next(ctx)
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return nil, nil, err
		}
		survey.Observe(f)
		watch.Observe(f)
		if told != nil {
			told(n + 1)
		}
	}
	return survey.Survey(), watch.Report(), nil
}

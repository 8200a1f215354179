//go:build !gocv_specific_modules || !gocv_videoio

package clip

func openVideo(*Facts) (Source, error) { return nil, ErrNoOpenCV }

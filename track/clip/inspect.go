package clip

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"os"
	"path/filepath"
)

// Inspect reads a clip's facts: size, codec, turn, tags and the time of every
// frame, without decoding pictures. path is a video file or a folder of numbered
// pictures. Errors name the file, what is wrong with it and what to do.
func Inspect(ctx context.Context, path string, opt Options) (*Facts, error) {
	if opt.RateFactor == 0 {
		opt.RateFactor = 1
	}
	if !(opt.RateFactor > 0) || math.IsInf(opt.RateFactor, 0) {
		return nil, fmt.Errorf("rate_factor is %g; it is recorded frames/s over played frames/s and must be above 0 (1 when the clip plays at real speed)", opt.RateFactor)
	}
	info, err := os.Stat(path)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return nil, fmt.Errorf("clip %s does not exist; check the path", path)
	case err != nil:
		return nil, fmt.Errorf("clip %s cannot be opened (%v); check the path and its permissions", path, err)
	}
	abs, err := filepath.Abs(path)
	if err != nil {
		return nil, fmt.Errorf("clip %s: %v", path, err)
	}
	f := &Facts{Path: path, absolute: abs, RateFactor: opt.RateFactor, Tags: map[string]string{}}
	switch {
	case info.IsDir():
		err = f.readPictures(ctx, opt.FramesPerS)
	case !info.Mode().IsRegular():
		err = fmt.Errorf("clip %s is neither a file nor a folder; give a video file or a folder of numbered pictures", path)
	case info.Size() == 0:
		err = fmt.Errorf("clip %s is empty (0 bytes); the copy probably failed: copy it from the phone again", path)
	default:
		err = f.readContainer(ctx)
	}
	if err != nil {
		return nil, err
	}
	f.deriveTimes()
	f.warn()
	return f, nil
}

// hashFiles returns the SHA-256 of the files' bytes, one after the other.
func hashFiles(ctx context.Context, paths ...string) (string, error) {
	h := sha256.New()
	for _, p := range paths {
		if err := ctx.Err(); err != nil {
			return "", err
		}
		if err := hashInto(ctx, h, p); err != nil {
			return "", err
		}
	}
	return hex.EncodeToString(h.Sum(nil)), nil
}

func hashInto(ctx context.Context, w io.Writer, path string) error {
	in, err := os.Open(path)
	if err != nil {
		return fmt.Errorf("%s cannot be read (%v); check its permissions", path, err)
	}
	defer in.Close()
	if _, err := io.Copy(w, &untilDone{ctx, in}); err != nil {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		return fmt.Errorf("%s cannot be read (%v); check the disk it is on", path, err)
	}
	return nil
}

// untilDone is a reader that stops when its context does.
type untilDone struct {
	ctx context.Context
	r   io.Reader
}

func (u *untilDone) Read(p []byte) (int, error) {
	if err := u.ctx.Err(); err != nil {
		return 0, err
	}
	return u.r.Read(p)
}

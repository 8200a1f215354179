package clip

import (
	"context"
	"fmt"
	"image"
	_ "image/jpeg" // picture formats of a numbered folder
	_ "image/png"
	"io"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"sort"
	"strconv"
	"strings"
)

var numberedName = regexp.MustCompile(`^(.*?)(\d+)\.(?i:png|jpe?g)$`)

// readPictures fills f from a folder of numbered pictures. The number is the
// frame's: a missing number is a lost frame.
func (f *Facts) readPictures(ctx context.Context, perS float64) error {
	entries, err := os.ReadDir(f.absolute)
	if err != nil {
		return fmt.Errorf("folder %s cannot be read (%v); check its permissions", f.Path, err)
	}
	type picture struct {
		name   string
		number int
	}
	var pics []picture
	prefixes := map[string]string{}
	for _, e := range entries {
		m := numberedName.FindStringSubmatch(e.Name())
		if m == nil || e.IsDir() {
			continue
		}
		n, err := strconv.Atoi(m[2])
		if err != nil || n > math.MaxInt32 {
			return fmt.Errorf("folder %s: the number in %s is too large; number the pictures 1, 2, 3 …", f.Path, e.Name())
		}
		pics = append(pics, picture{e.Name(), n})
		prefixes[m[1]] = e.Name()
	}
	if len(pics) == 0 {
		return fmt.Errorf("folder %s holds no numbered pictures; name them like frame-0001.png (png or jpg)", f.Path)
	}
	if len(prefixes) > 1 {
		var names []string
		for _, n := range prefixes {
			names = append(names, n)
		}
		sort.Strings(names)
		return fmt.Errorf("folder %s holds %d series of numbered pictures (%s …); put each in a folder of its own", f.Path, len(prefixes), strings.Join(names[:2], ", "))
	}
	if !(perS > 0) || math.IsInf(perS, 0) {
		return fmt.Errorf("folder %s: pictures carry no times; say in the rig how fast they were taken: [camera] frames_per_s = 60", f.Path)
	}
	sort.Slice(pics, func(i, j int) bool { return pics[i].number < pics[j].number })
	step := 0
	for i := 1; i < len(pics); i++ {
		d := pics[i].number - pics[i-1].number
		if d == 0 {
			return fmt.Errorf("folder %s: %s and %s have the same number; remove one", f.Path, pics[i-1].name, pics[i].name)
		}
		step = gcd(step, d)
	}
	if step > 1 {
		f.Warnings = append(f.Warnings, fmt.Sprintf("The pictures' numbers go in steps of %d; each step is taken as one frame.", step))
	}
	for i, p := range pics {
		full := filepath.Join(f.absolute, p.name)
		cfg, format, err := pictureConfig(full)
		if err != nil {
			return err
		}
		if i == 0 {
			f.StoredW, f.StoredH, f.Codec = cfg.Width, cfg.Height, format
			if cfg.Width <= 0 || cfg.Height <= 0 {
				return fmt.Errorf("picture %s has no pixels; remove it", full)
			}
		} else if cfg.Width != f.StoredW || cfg.Height != f.StoredH {
			return fmt.Errorf("folder %s: %s is %d × %d pixels but %s is %d × %d; all pictures of a clip must have one size", f.Path, p.name, cfg.Width, cfg.Height, pics[0].name, f.StoredW, f.StoredH)
		}
		f.pictures = append(f.pictures, full)
		k := p.number - pics[0].number
		if step > 1 {
			k /= step
		}
		f.pts = append(f.pts, float64(k)/perS)
		if err := ctx.Err(); err != nil {
			return err
		}
	}
	f.Container, f.Numbered, f.PixelFormat, f.NominalRate = "numbered pictures", true, "rgb", perS
	f.W, f.H = f.StoredW, f.StoredH
	if f.Codec == "jpeg" {
		var mirror bool
		if f.RotationDeg, mirror = jpegTurn(f.pictures[0]); mirror {
			f.Warnings = append(f.Warnings, mirrorWarning)
		}
		if f.RotationDeg%180 == 90 {
			f.W, f.H = f.H, f.W
		}
	}
	f.SHA256, err = hashFiles(ctx, f.pictures...)
	return err
}

func pictureConfig(path string) (image.Config, string, error) {
	in, err := os.Open(path)
	if err != nil {
		return image.Config{}, "", fmt.Errorf("picture %s cannot be read (%v); check its permissions", path, err)
	}
	defer in.Close()
	cfg, format, err := image.DecodeConfig(in)
	if err != nil {
		return cfg, "", fmt.Errorf("picture %s cannot be read (%v); it is damaged or no png or jpg: remove or replace it", path, err)
	}
	return cfg, format, nil
}

func gcd(a, b int) int {
	for b != 0 {
		a, b = b, a%b
	}
	return a
}

// pictureSource reads numbered pictures in plain Go.
type pictureSource struct {
	facts *Facts
	next  int
	frame *Frame
	broke string
	at    float64
}

func openPictures(f *Facts) (Source, error) {
	s := &pictureSource{facts: f, frame: NewFrame(0, 0, f.StoredW, f.StoredH), at: math.NaN()}
	s.frame.RotationDeg = f.RotationDeg
	return s, nil
}

func (s *pictureSource) Next(ctx context.Context) (*Frame, error) {
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	if s.next >= len(s.facts.pictures) || s.broke != "" {
		return nil, io.EOF
	}
	name := s.facts.pictures[s.next]
	img, err := decodePicture(name)
	if err == nil && (img.Bounds().Dx() != s.frame.W || img.Bounds().Dy() != s.frame.H) {
		err = fmt.Errorf("picture %s has changed its size while it was read", name)
	}
	if err != nil {
		if s.next == 0 {
			return nil, err
		}
		s.at = s.facts.Times[s.next-1]
		s.broke = fmt.Sprintf("The clip broke off after frame %d of %d, at %.3f s: %v.", s.next, len(s.facts.pictures), s.at, err)
		return nil, io.EOF
	}
	fillFrame(s.frame, img)
	s.frame.Index, s.frame.T = s.next, s.facts.Times[s.next]
	s.next++
	return s.frame, nil
}

func decodePicture(path string) (image.Image, error) {
	in, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("picture %s cannot be read (%v)", path, err)
	}
	defer in.Close()
	img, _, err := image.Decode(in)
	if err != nil {
		return nil, fmt.Errorf("picture %s is damaged (%v)", path, err)
	}
	return img, nil
}

func (s *pictureSource) Close() error              { return nil }
func (s *pictureSource) Facts() *Facts             { return s.facts }
func (s *pictureSource) Damage() (float64, string) { return s.at, s.broke }

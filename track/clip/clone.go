package clip

import "slices"

// Clone returns a copy of the frame that outlives the next call of Next.
func (f *Frame) Clone() *Frame {
	c := *f
	c.Pix = slices.Clone(f.Pix)
	return &c
}

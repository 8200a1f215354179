package film

import (
	"encoding/binary"
	"fmt"
	"os"
)

// setRotation writes a display matrix into the video track's header of the mp4
// file at path (ISO/IEC 14496-12, tkhd box): the player turns the stored
// picture clockwise by deg, a multiple of 90. ffmpeg's own option for this
// changes its name and sense with the version, so the 36 bytes are set here.
func setRotation(path string, deg int) error {
	f, err := os.OpenFile(path, os.O_RDWR, 0)
	if err != nil {
		return err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return err
	}
	at, err := findBox(f, 0, info.Size(), "moov", "trak", "tkhd")
	if err != nil {
		return fmt.Errorf("the clip's rotation could not be written: %w", err)
	}
	head := make([]byte, 104)
	if _, err := f.ReadAt(head[:92], at); err != nil {
		return err
	}
	matrix := int64(8 + 4 + 20 + 16) // box head, version and flags, times, layer …
	if head[8] == 1 {
		matrix += 12 // 64-bit times
	}
	if _, err := f.ReadAt(head[:matrix+44], at); err != nil {
		return err
	}
	width := binary.BigEndian.Uint32(head[matrix+36:]) // 16.16, as stored
	height := binary.BigEndian.Uint32(head[matrix+40:])
	const one = 1 << 16
	var m [9]uint32
	minus := ^uint32(one) + 1
	switch ((deg % 360) + 360) % 360 {
	case 0:
		m[0], m[4] = one, one
	case 90:
		m[1], m[3], m[6] = one, minus, height
	case 180:
		m[0], m[4], m[6], m[7] = minus, minus, width, height
	case 270:
		m[1], m[3], m[7] = minus, one, width
	default:
		return fmt.Errorf("a clip can be turned by 90, 180 or 270 degrees, not by %d: mend rotation_deg in [film]", deg)
	}
	m[8] = 1 << 30
	out := make([]byte, 36)
	for i, x := range m {
		binary.BigEndian.PutUint32(out[4*i:], x)
	}
	_, err = f.WriteAt(out, at+matrix)
	return err
}

// findBox gives the offset of the first box with that path within [from, to).
func findBox(f *os.File, from, to int64, path ...string) (int64, error) {
	for from+8 <= to {
		var head [16]byte
		if _, err := f.ReadAt(head[:], from); err != nil {
			return 0, err
		}
		size, body := int64(binary.BigEndian.Uint32(head[:4])), int64(8)
		if size == 1 {
			size, body = int64(binary.BigEndian.Uint64(head[8:])), 16
		} else if size == 0 {
			size = to - from
		}
		if size < body {
			break
		}
		if string(head[4:8]) == path[0] {
			if len(path) == 1 {
				return from, nil
			}
			return findBox(f, from+body, from+size, path[1:]...)
		}
		from += size
	}
	return 0, fmt.Errorf("the file has no %q box", path[0])
}

package clip

import (
	"bufio"
	"encoding/binary"
	"io"
	"os"
)

// jpegTurn returns the clockwise turn that a photograph's Exif orientation asks
// for (tag 0x0112; CIPA DC-008), 0 where it asks for none, and whether the
// picture is mirrored.
func jpegTurn(path string) (deg int, mirror bool) {
	in, err := os.Open(path)
	if err != nil {
		return 0, false
	}
	defer in.Close()
	switch orientation(bufio.NewReader(in)) {
	case 2:
		return 0, true
	case 3:
		return 180, false
	case 4:
		return 180, true
	case 5:
		return 90, true
	case 6:
		return 90, false
	case 7:
		return 270, true
	case 8:
		return 270, false
	}
	return 0, false
}

// orientation reads the Exif orientation of a JPEG stream; 0 where there is
// none. It never reads past the picture's own data.
func orientation(r io.Reader) int {
	var b [4]byte
	if _, err := io.ReadFull(r, b[:2]); err != nil || b[0] != 0xff || b[1] != 0xd8 {
		return 0
	}
	for range 20 { // segments before the picture's data; Exif is one of the first
		if _, err := io.ReadFull(r, b[:]); err != nil || b[0] != 0xff || b[1] == 0xda {
			return 0
		}
		n := int(b[2])<<8 | int(b[3])
		if n < 2 {
			return 0
		}
		data := make([]byte, n-2)
		if _, err := io.ReadFull(r, data); err != nil {
			return 0
		}
		if b[1] == 0xe1 && len(data) > 14 && string(data[:6]) == "Exif\x00\x00" {
			return tiffOrientation(data[6:])
		}
	}
	return 0
}

// tiffOrientation looks through the first directory of a TIFF block.
func tiffOrientation(t []byte) int {
	var order binary.ByteOrder = binary.LittleEndian
	switch string(t[:2]) {
	case "II":
	case "MM":
		order = binary.BigEndian
	default:
		return 0
	}
	at := int64(order.Uint32(t[4:]))
	if at < 8 || at+2 > int64(len(t)) {
		return 0
	}
	n := int64(order.Uint16(t[at:]))
	for i := range n {
		e := at + 2 + 12*i
		if e+12 > int64(len(t)) {
			return 0
		}
		if order.Uint16(t[e:]) == 0x0112 {
			return int(order.Uint16(t[e+8:]))
		}
	}
	return 0
}

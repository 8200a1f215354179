package plots

import (
	"bytes"
	"encoding/base64"
	"errors"
	"fmt"
	"html"
	"image/jpeg"
	"image/png"
	"regexp"
	"strconv"
	"strings"

	"gonum.org/v1/plot/vg"
)

// faces are all of about the width of the one that the figures are laid out in,
// and on nearly every system one of them is there.
const faces = `'Liberation Sans', Arial, Helvetica, 'Nimbus Sans', sans-serif`

var (
	textTag  = regexp.MustCompile(`(?s)<text x="([^"]*)" y="([^"]*)" transform="scale\(1, -1\)"\s*(?:style="([^"]*)")?>(.*?)</text>`)
	imageTag = regexp.MustCompile(`xlink:href="data:image/jpg;base64,([^"]*)"`)
	sizeOf   = regexp.MustCompile(`font-size:([0-9.]+)px`)
	fillOf   = regexp.MustCompile(`fill:([^;"]+)`)
)

// finishSVG makes gonum's SVG fit for any browser and for a screen reader: a
// title and a description, a list of faces instead of one that is seldom
// installed, each text held to the width it was laid out with whatever face
// draws it, and pictures in their true format and no larger than needed.
func finishSVG(raw []byte, d *drawing) ([]byte, error) {
	start := bytes.Index(raw, []byte("<svg"))
	if start < 0 {
		return nil, errors.New("the drawing holds no <svg>")
	}
	body := start + bytes.IndexByte(raw[start:], '>') + 1
	var out bytes.Buffer
	fmt.Fprintf(&out, `<svg xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink" width="%gpt" height="%gpt" viewBox="0 0 %g %g" role="img" aria-labelledby="%s-t %s-d" font-family="%s">`+"\n",
		d.w, d.h, d.w, d.h, d.name, d.name, faces)
	fmt.Fprintf(&out, "<title id=\"%s-t\">%s</title>\n<desc id=\"%s-d\">%s</desc>\n", d.name, html.EscapeString(d.title), d.name, html.EscapeString(d.caption))
	fmt.Fprintf(&out, "<rect width=\"%g\" height=\"%g\" fill=\"#fff\"/>\n", d.w, d.h)
	rest := textTag.ReplaceAllFunc(raw[body:], func(tag []byte) []byte {
		m := textTag.FindSubmatch(tag)
		style := string(m[3])
		size := 12.0 // SVG's medium
		if s := sizeOf.FindStringSubmatch(style); s != nil {
			size, _ = strconv.ParseFloat(s[1], 64)
		}
		bold := strings.Contains(style, "font-weight:bold")
		text := html.UnescapeString(string(m[4]))
		var b strings.Builder
		fmt.Fprintf(&b, `<text x="%s" y="%s" transform="scale(1,-1)" font-size="%g"`, m[1], m[2], size)
		if bold {
			b.WriteString(` font-weight="bold"`)
		}
		if fill := fillOf.FindStringSubmatch(style); fill != nil {
			fmt.Fprintf(&b, ` fill="%s"`, fill[1])
		}
		// A text that the layout's face cannot write keeps the width of whatever face can.
		if f := typeface(vg.Length(size), bold); drawable(text, f) {
			w := textWidth(text, f)
			fmt.Fprintf(&b, ` textLength="%.2f" lengthAdjust="spacingAndGlyphs"`, w)
		}
		fmt.Fprintf(&b, `>%s</text>`, html.EscapeString(text))
		return []byte(b.String())
	})
	var bad error
	rest = imageTag.ReplaceAllFunc(rest, func(tag []byte) []byte {
		data, err := base64.StdEncoding.DecodeString(string(imageTag.FindSubmatch(tag)[1]))
		if err != nil {
			bad = err
			return tag
		}
		kind, data, err := packed(data)
		if err != nil {
			bad = err
			return tag
		}
		return fmt.Appendf(nil, `xlink:href="data:image/%s;base64,%s"`, kind, base64.StdEncoding.EncodeToString(data))
	})
	out.Write(rest)
	return out.Bytes(), bad
}

// packed stores an opaque picture as JPEG where that takes fewer bytes.
func packed(data []byte) (kind string, out []byte, err error) {
	img, err := png.Decode(bytes.NewReader(data))
	if err != nil {
		return "", nil, err
	}
	if o, ok := img.(interface{ Opaque() bool }); !ok || !o.Opaque() {
		return "png", data, nil
	}
	var b bytes.Buffer
	if err := jpeg.Encode(&b, img, &jpeg.Options{Quality: 82}); err != nil {
		return "", nil, err
	}
	if b.Len() >= len(data) {
		return "png", data, nil
	}
	return "jpeg", b.Bytes(), nil
}

package figure

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"hash/crc32"
	"image/color"
	"io"
	"slices"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgpdf"
	"gonum.org/v1/plot/vg/vgsvg"
)

// resolution of pixels per inch, for PNG and for the maps in SVG and PDF.
const resolution = 300

// Formats are the formats that Write knows, which are also the endings of
// their files.
var Formats = []string{"png", "svg", "pdf"}

// Write draws the figure in one of the Formats. The bytes of PNG and SVG
// depend on the figure alone; a PDF carries the time at which it was made. Errors
// are those of Check, an unknown format, a size that leaves no room for the
// panels, and w's own.
func (f *Figure) Write(w io.Writer, format string) error {
	if !slices.Contains(Formats, format) {
		return fmt.Errorf("figure: unknown format %q; use png, svg or pdf", format)
	}
	if err := f.Check(); err != nil {
		return err
	}
	width, height := f.size()
	var canvas vg.CanvasWriterTo
	switch format {
	case "png":
		canvas = vgimg.PngCanvas{Canvas: vgimg.NewWith(vgimg.UseWH(width, height),
			vgimg.UseDPI(resolution), vgimg.UseBackgroundColor(color.White))}
	case "svg":
		canvas = vgsvg.New(width, height)
	case "pdf":
		canvas = vgpdf.New(width, height)
	}
	p := &pen{Canvas: canvas, outlines: format != "svg", upside: format == "pdf"}
	if err := f.draw(p, width, height); err != nil {
		return err
	}
	var out bytes.Buffer
	if _, err := canvas.WriteTo(&out); err != nil {
		return fmt.Errorf("figure: making the %s: %w", format, err)
	}
	data := out.Bytes()
	switch format {
	case "png":
		data = withResolution(data)
	case "svg":
		data = repaired(data, p.widths)
	}
	if _, err := w.Write(data); err != nil {
		return fmt.Errorf("figure: writing the %s: %w", format, err)
	}
	return nil
}

// size returns width and height in points.
func (f *Figure) size() (width, height vg.Length) {
	w, h := f.Width, f.Height
	if w == 0 {
		w = 16
	}
	if h == 0 {
		for i := range f.Panels {
			h += 10 * f.Panels[i].share()
		}
		h = min(h, 25)
	}
	return vg.Length(w) * vg.Centimeter, vg.Length(h) * vg.Centimeter
}

func (p *Panel) share() float64 {
	if p.Share == 0 {
		return 1
	}
	return p.Share
}

// repaired corrects what the library writes into an SVG. Maps are PNG images
// but are declared as something that some viewers refuse. Letters have no
// substitute where the font is not installed; with one, each text keeps the
// width that it was laid out with.
func repaired(svg []byte, widths []vg.Length) []byte {
	svg = bytes.ReplaceAll(svg, []byte("data:image/jpg;base64,"), []byte("data:image/png;base64,"))
	svg = bytes.ReplaceAll(svg, []byte("font-family:Liberation Sans;"),
		[]byte("font-family:Liberation Sans,Arial,Helvetica,sans-serif;"))
	var out bytes.Buffer
	for i, part := range bytes.Split(svg, []byte("<text ")) {
		if i > 0 {
			fmt.Fprintf(&out, `<text textLength="%.5g" lengthAdjust="spacingAndGlyphs" `, widths[i-1].Points())
		}
		out.Write(part)
	}
	return out.Bytes()
}

// withResolution adds the chunk pHYs (W3C PNG specification, 11.3.5.3) behind
// the header, so that the picture comes out at its size on a page.
func withResolution(png []byte) []byte {
	const header = 8 + 25 // signature and the chunk IHDR
	chunk := binary.BigEndian.AppendUint32(nil, 9)
	chunk = append(chunk, "pHYs"...)
	perMetre := uint32(11811) // resolution / 0.0254 m
	chunk = binary.BigEndian.AppendUint32(chunk, perMetre)
	chunk = binary.BigEndian.AppendUint32(chunk, perMetre)
	chunk = append(chunk, 1)
	chunk = binary.BigEndian.AppendUint32(chunk, crc32.ChecksumIEEE(chunk[4:]))
	return slices.Concat(png[:header], chunk, png[header:])
}

package figure

import (
	"strings"
	"sync"
	"unicode/utf8"

	xfont "golang.org/x/image/font"
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/font/liberation"
	"gonum.org/v1/plot/vg"
)

// Sizes of the letters in points, to be read at the size of the page.
const (
	labelSize = 11
	tickSize  = 10
	keySize   = 10 // legend
	titleSize = 11
)

// sans looks up the sans-serif letters, which are parsed when first needed.
var sans = sync.OnceValue(func() *font.Cache { return font.NewCache(liberation.Collection()) })

func letters(size float64) font.Face {
	return sans().Lookup(font.Font{Typeface: "Liberation", Variant: "Sans"}, vg.Length(size))
}

func bold(size float64) font.Face {
	return sans().Lookup(font.Font{Typeface: "Liberation", Variant: "Sans", Weight: xfont.WeightBold}, vg.Length(size))
}

// raised are the superscripts, most of which the font lacks: they are set as
// small figures above the line.
const (
	raised   = "⁰¹²³⁴⁵⁶⁷⁸⁹⁻"
	lowered  = "0123456789−"
	small    = 0.68 // size of superscripts
	baseline = 0.36 // their height above the line, of the letters' size
	middle   = 0.35 // half the height of figures, of the letters' size
)

// superscript writes a whole number in superscripts.
func superscript(text string) string {
	var out strings.Builder
	up := []rune(raised)
	for _, r := range text {
		if r == '-' {
			r = '−'
		}
		if i := strings.IndexRune(lowered, r); i >= 0 {
			r = up[utf8.RuneCountInString(lowered[:i])]
		}
		out.WriteRune(r)
	}
	return out.String()
}

// A run is a part of a text that is set in one size at one height.
type run struct {
	text string
	face font.Face
	rise vg.Length
}

func runs(face font.Face, text string) []run {
	var out []run
	up := face
	up.Font.Size *= small
	down := []rune(lowered)
	for _, r := range text {
		next := run{text: string(r), face: face}
		if i := strings.IndexRune(raised, r); i >= 0 {
			next = run{string(down[utf8.RuneCountInString(raised[:i])]), up, baseline * face.Font.Size}
		}
		if last := len(out) - 1; last >= 0 && out[last].rise == next.rise {
			out[last].text += next.text
		} else {
			out = append(out, next)
		}
	}
	return out
}

func width(face font.Face, text string) vg.Length {
	var w vg.Length
	for _, r := range runs(face, text) {
		w += r.face.Width(r.text)
	}
	return w
}

// wrapped breaks a text into lines of that width at most, at spaces; a word
// that is longer by itself is cut.
func wrapped(face font.Face, text string, room vg.Length) []string {
	var lines []string
	line := ""
	for _, word := range strings.Fields(text) {
		if longer := strings.TrimSpace(line + " " + word); width(face, longer) <= room {
			line = longer
			continue
		}
		if line != "" {
			lines = append(lines, line)
		}
		line = cut(face, word, room)
	}
	if line != "" {
		lines = append(lines, line)
	}
	return lines
}

// cut shortens a text that is wider than the room.
func cut(face font.Face, text string, room vg.Length) string {
	if width(face, text) <= room {
		return text
	}
	letters := []rune(text)
	for len(letters) > 0 && width(face, string(letters)+"…") > room {
		letters = letters[:len(letters)-1]
	}
	return string(letters) + "…"
}

// outline is the shape of a text whose line begins at the origin.
func outline(face font.Face, text string) vg.Path {
	var (
		path   vg.Path
		buffer sfnt.Buffer
	)
	ppem := fixed.I(int(face.Face.UnitsPerEm()))
	scale := face.Font.Size / vg.Length(ppem)
	for i, r := range text {
		index, err := face.Face.GlyphIndex(&buffer, r)
		if err != nil {
			continue // index 0 is the box for a missing letter; an error is a broken font
		}
		segments, err := face.Face.LoadGlyph(&buffer, index, ppem, nil)
		if err != nil {
			continue
		}
		letter := string(r)
		left := face.Width(text[:i+len(letter)]) - face.Width(letter) // with kerning
		at := func(p fixed.Point26_6) vg.Point {
			return vg.Point{X: left + vg.Length(p.X)*scale, Y: -vg.Length(p.Y) * scale}
		}
		for k, s := range segments {
			switch s.Op {
			case sfnt.SegmentOpMoveTo:
				if k > 0 {
					path.Close()
				}
				path.Move(at(s.Args[0]))
			case sfnt.SegmentOpLineTo:
				path.Line(at(s.Args[0]))
			case sfnt.SegmentOpQuadTo:
				path.QuadTo(at(s.Args[0]), at(s.Args[1]))
			case sfnt.SegmentOpCubeTo:
				path.CubeTo(at(s.Args[0]), at(s.Args[1]), at(s.Args[2]))
			}
		}
		if len(segments) > 0 {
			path.Close()
		}
	}
	return path
}

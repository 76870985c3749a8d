package plot

import (
	"math"
	"strings"
	"sync"

	"golang.org/x/image/font"
	"golang.org/x/image/font/gofont/gobold"
	"golang.org/x/image/font/gofont/goregular"
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
)

// A glyph is an outline in units of the em, y upwards from the baseline.
type glyph struct {
	advance                float64
	segments               []segment
	minX, minY, maxX, maxY float64
}

type segment struct {
	op   sfnt.SegmentOp
	args [3]Point
}

// A face is a font with the outlines used so far.
type face struct {
	font   *sfnt.Font
	mu     sync.Mutex
	buffer sfnt.Buffer
	glyphs map[rune]*glyph
}

func open(ttf []byte) *face {
	f, err := sfnt.Parse(ttf)
	if err != nil {
		panic(err) // the font is compiled in
	}
	return &face{font: f, glyphs: map[rune]*glyph{}}
}

var (
	regular = sync.OnceValue(func() *face { return open(goregular.TTF) })
	bold    = sync.OnceValue(func() *face { return open(gobold.TTF) })
)

func faceOf(b bool) *face {
	if b {
		return bold()
	}
	return regular()
}

// glyph returns the outline of a rune, that of the font's box for one that it does not have.
func (f *face) glyph(r rune) *glyph {
	f.mu.Lock()
	defer f.mu.Unlock()
	if g := f.glyphs[r]; g != nil {
		return g
	}
	const em = 2048 // fixed-point pixels: finer than the font's own grid
	g := &glyph{minX: math.Inf(1), minY: math.Inf(1), maxX: math.Inf(-1), maxY: math.Inf(-1)}
	f.glyphs[r] = g
	index, err := f.font.GlyphIndex(&f.buffer, r)
	if err != nil {
		return g
	}
	ppem := fixed.I(em)
	if advance, err := f.font.GlyphAdvance(&f.buffer, index, ppem, font.HintingNone); err == nil {
		g.advance = float64(advance) / 64 / em
	}
	outline, err := f.font.LoadGlyph(&f.buffer, index, ppem, nil)
	if err != nil {
		return g
	}
	points := [...]int{sfnt.SegmentOpMoveTo: 1, sfnt.SegmentOpLineTo: 1, sfnt.SegmentOpQuadTo: 2, sfnt.SegmentOpCubeTo: 3}
	for _, s := range outline {
		out := segment{op: s.Op}
		for i := range points[s.Op] {
			p := Point{float64(s.Args[i].X) / 64 / em, -float64(s.Args[i].Y) / 64 / em}
			out.args[i] = p
			g.minX, g.maxX = min(g.minX, p.X), max(g.maxX, p.X)
			g.minY, g.maxY = min(g.minY, p.Y), max(g.maxY, p.Y)
		}
		g.segments = append(g.segments, out)
	}
	return g
}

// Raised and lowered figures are smaller by this factor, their baseline shifted by so much of the em (common practice in
// typesetting).
const (
	scriptSize = 0.68
	raise      = 0.36
	lower      = -0.14
)

var (
	superscripts = pairs("⁰¹²³⁴⁵⁶⁷⁸⁹⁺⁻", "0123456789+\u2212")
	subscripts   = pairs("₀₁₂₃₄₅₆₇₈₉", "0123456789")
)

func pairs(from, to string) map[rune]rune {
	m := map[rune]rune{}
	target := []rune(to)
	for i, r := range []rune(from) {
		m[r] = target[i]
	}
	return m
}

// A placed is a glyph at its place along the line, in units of the em.
type placed struct {
	*glyph
	x, y, scale float64
}

func (f *face) set(text string) (line []placed, width float64) {
	for _, r := range text {
		p := placed{x: width, scale: 1}
		if normal, ok := superscripts[r]; ok {
			r, p.y, p.scale = normal, raise, scriptSize
		} else if normal, ok := subscripts[r]; ok {
			r, p.y, p.scale = normal, lower, scriptSize
		}
		p.glyph = f.glyph(r)
		width += p.advance * p.scale
		line = append(line, p)
	}
	return line, width
}

// TextWidth is the width of a line of text in the unit of size.
func TextWidth(text string, size float64, bold bool) float64 {
	_, width := faceOf(bold).set(text)
	return width * size
}

// Heights of capitals and depth of descenders of the fonts used, in ems.
const (
	Ascent  = 0.74
	Descent = 0.21
)

// Box returns the rectangle that the ink of the text fills.
func (t *Text) Box() Box {
	line, width := faceOf(t.Bold).set(t.String)
	minX, minY, maxX, maxY := math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)
	for _, p := range line {
		if len(p.segments) == 0 {
			continue
		}
		minX, maxX = min(minX, p.x+p.scale*p.minX), max(maxX, p.x+p.scale*p.maxX)
		minY, maxY = min(minY, p.y+p.scale*p.minY), max(maxY, p.y+p.scale*p.maxY)
	}
	if minX > maxX {
		return Box{t.At.X, t.At.Y, 0, 0}
	}
	start := -width * float64(t.Align) / 2
	if t.Upward {
		return Box{t.At.X - maxY*t.Size, t.At.Y - (start+maxX)*t.Size, (maxY - minY) * t.Size, (maxX - minX) * t.Size}
	}
	return Box{t.At.X + (start+minX)*t.Size, t.At.Y - maxY*t.Size, (maxX - minX) * t.Size, (maxY - minY) * t.Size}
}

// Wrap breaks text into lines no wider than width; a word that is wider by itself is broken anywhere.
func Wrap(text string, size, width float64, bold bool) []string {
	var lines []string
	line := ""
	for word := range strings.FieldsSeq(text) {
		try := word
		if line != "" {
			try = line + " " + word
		}
		if TextWidth(try, size, bold) <= width {
			line = try
			continue
		}
		if line != "" {
			lines = append(lines, line)
		}
		line = ""
		for _, r := range word {
			if line != "" && TextWidth(line+string(r), size, bold) > width {
				lines = append(lines, line)
				line = ""
			}
			line += string(r)
		}
	}
	if line != "" || len(lines) == 0 {
		lines = append(lines, line)
	}
	return lines
}

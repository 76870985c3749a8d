package table

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"strconv"
	"strings"
)

// A form is a way to write a map, for tests.
type form struct {
	wide    bool
	sep     string
	decimal string
	eol     string
	header  bool
	comment string // lines put first
}

var forms = map[string]form{
	"wide tab":             {wide: true, sep: "\t", decimal: ".", eol: "\n", header: true},
	"wide tab CRLF comma":  {wide: true, sep: "\t", decimal: ",", eol: "\r\n", header: true},
	"wide semicolon comma": {wide: true, sep: ";", decimal: ",", eol: "\n", header: true, comment: "# laser 532 nm\n"},
	"wide comma":           {wide: true, sep: ",", decimal: ".", eol: "\n", header: true},
	"wide comma blank":     {wide: true, sep: ", ", decimal: ".", eol: "\n", header: true},
	"wide blanks":          {wide: true, sep: "  ", decimal: ".", eol: "\n", header: true, comment: "% a: b\n\n"},
	"wide tab blank head":  {wide: true, sep: "\t", decimal: ".", eol: "\n"},
	"wide blanks headless": {wide: true, sep: " ", decimal: ",", eol: "\r\n"},
	"long tab":             {sep: "\t", decimal: ".", eol: "\n", header: true},
	"long tab headless":    {sep: "\t", decimal: ".", eol: "\r\n"},
	"long semicolon comma": {sep: ";", decimal: ",", eol: "\r\n", header: true, comment: "// made at night\n"},
	"long comma":           {sep: ",", decimal: ".", eol: "\n", header: true},
	"long blanks":          {sep: "   ", decimal: ".", eol: "\n", header: true},
	"long blanks comma":    {sep: " ", decimal: ",", eol: "\n", header: true, comment: "\xef\xbb\xbf"},
}

// A sample is a map for tests: a serpentine over nx columns.
type sample struct {
	axis   []float64
	x, y   []float64
	counts [][]float32
}

func newSample(nx, ny, channels int) *sample {
	r := rand.New(rand.NewPCG(1, 2))
	s := &sample{}
	for k := range channels {
		s.axis = append(s.axis, 1200+1.25*float64(k)+float64(k*k)/(1<<14))
	}
	for j := range ny {
		for i := range nx {
			if j%2 == 1 {
				i = nx - 1 - i
			}
			s.x, s.y = append(s.x, -3+0.5*float64(i)), append(s.y, 0.25*float64(j))
			row := make([]float32, channels)
			for k := range row {
				if row[k] = float32(r.IntN(3000)); r.IntN(5) == 0 {
					row[k] += 0.5
				}
			}
			s.counts = append(s.counts, row)
		}
	}
	return s
}

func (s *sample) text(f form) []byte {
	var b bytes.Buffer
	b.WriteString(f.comment)
	num := func(v float64) string {
		return strings.Replace(strconv.FormatFloat(v, 'f', -1, 64), ".", f.decimal, 1)
	}
	if f.wide {
		switch {
		case f.header:
			b.WriteString("X (um)" + f.sep + "Y (um)")
		case strings.TrimSpace(f.sep) == "" && f.sep[0] == ' ':
		default:
			b.WriteString(f.sep)
		}
		for k, v := range s.axis {
			if k > 0 || b.Len() > len(f.comment) {
				b.WriteString(f.sep)
			}
			b.WriteString(num(v))
		}
		b.WriteString(f.eol)
		for i, row := range s.counts {
			fmt.Fprintf(&b, "%s%s%s", num(s.x[i]), f.sep, num(s.y[i]))
			for _, v := range row {
				b.WriteString(f.sep + num(float64(v)))
			}
			b.WriteString(f.eol)
		}
		return b.Bytes()
	}
	if f.header {
		b.WriteString(strings.Join([]string{"x", "y", "Raman shift (cm-1)", "counts"}, f.sep) + f.eol)
	}
	for i, row := range s.counts {
		for k, v := range row {
			b.WriteString(strings.Join([]string{num(s.x[i]), num(s.y[i]), num(s.axis[k]), num(float64(v))}, f.sep) + f.eol)
		}
	}
	return b.Bytes()
}

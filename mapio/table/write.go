package table

import (
	"bytes"
	"io"
	"math"
	"strconv"
)

// A Style says how a run is written. The zero value is wide text with tabs, decimal points and LF.
type Style struct {
	Long         bool // a row per channel; otherwise a row per pixel
	Separator    byte // default tab; with DecimalComma it must not be a comma
	DecimalComma bool
	CRLF         bool
	Comments     []string // lines put first, each after "# "
	Wavelength   bool     // the axis is in nm; otherwise it is the Raman shift in cm-1
	// Decimals of what is not a whole number. Default 3 for positions (um) and for the axis, the shortest form that reads back as
	// the same number for counts.
	PositionDecimals, AxisDecimals, CountsDecimals int
	NoHeader                                       bool // long: no row of column names. Wide text always has its axis
}

// An Encoder writes pixels in one style as text. It does not change once made, so that several workers may use it.
type Encoder struct {
	style Style
	axis  [][]byte // as written, one per channel
	eol   string
}

// NewEncoder returns an encoder of runs with that axis, in cm-1, or in nm where the style says so.
func NewEncoder(axis []float64, style Style) *Encoder {
	if style.Separator == 0 {
		style.Separator = '\t'
	}
	if style.PositionDecimals == 0 {
		style.PositionDecimals = 3
	}
	if style.AxisDecimals == 0 {
		style.AxisDecimals = 3
	}
	if style.CountsDecimals == 0 {
		style.CountsDecimals = -1
	}
	e := &Encoder{style: style, eol: "\n"}
	if style.CRLF {
		e.eol = "\r\n"
	}
	for _, v := range axis {
		e.axis = append(e.axis, e.number(nil, v, style.AxisDecimals, 64))
	}
	return e
}

// AppendHeader appends what stands above the first pixel.
func (e *Encoder) AppendHeader(dst []byte) []byte {
	for _, line := range e.style.Comments {
		dst = append(dst, "# "...)
		dst = append(dst, line...)
		dst = append(dst, e.eol...)
	}
	// The unit of the axis: long text has it in its column's name, wide text has no cell for it.
	name := "Raman shift (cm-1)"
	if e.style.Wavelength {
		name = "wavelength (nm)"
	}
	sep := e.style.Separator
	if e.style.Long {
		if e.style.NoHeader {
			return dst
		}
		dst = append(dst, "x (um)"...)
		dst = append(append(dst, sep), "y (um)"...)
		dst = append(append(dst, sep), name...)
		dst = append(append(dst, sep), "counts"...)
		return append(dst, e.eol...)
	}
	dst = append(dst, "# axis: "...)
	dst = append(dst, name...)
	dst = append(dst, e.eol...)
	dst = append(dst, "x (um)"...)
	dst = append(append(dst, sep), "y (um)"...)
	for _, v := range e.axis {
		dst = append(append(dst, sep), v...)
	}
	return append(dst, e.eol...)
}

// AppendPixel appends a pixel: its stage position, um, and its counts, one per channel. A count that is NaN is written as nan.
// It panics where counts and axis differ in length.
func (e *Encoder) AppendPixel(dst []byte, x, y float64, counts []float32) []byte {
	if len(counts) != len(e.axis) {
		panic("table: counts and axis differ in length")
	}
	sep := e.style.Separator
	start := len(dst)
	dst = append(e.number(dst, x, e.style.PositionDecimals, 64), sep)
	dst = append(e.number(dst, y, e.style.PositionDecimals, 64), sep)
	if !e.style.Long {
		for _, v := range counts {
			dst = append(e.count(dst, v), sep)
		}
		return append(dst[:len(dst)-1], e.eol...)
	}
	var scratch [64]byte
	place := append(scratch[:0], dst[start:]...)
	dst = dst[:start]
	for i, v := range counts {
		dst = append(dst, place...)
		dst = append(append(dst, e.axis[i]...), sep)
		dst = append(e.count(dst, v), e.eol...)
	}
	return dst
}

// count appends a count. Whole numbers, which is what detectors give, take the short path.
func (e *Encoder) count(dst []byte, v float32) []byte {
	if n := int32(v); float32(n) == v && n >= 0 && n < 1<<24 {
		return appendSmall(dst, uint32(n))
	}
	return e.number(dst, float64(v), e.style.CountsDecimals, 32)
}

// appendSmall appends a number below 1<<24. It is twice as fast as strconv for the three and four digits of usual counts.
func appendSmall(dst []byte, n uint32) []byte {
	var buf [8]byte
	i := len(buf)
	for n >= 10 {
		q := n / 10
		i--
		buf[i] = byte('0' + n - 10*q)
		n = q
	}
	i--
	buf[i] = byte('0' + n)
	return append(dst, buf[i:]...)
}

// number appends a number with so many decimals, or in the shortest form where decimals is -1.
func (e *Encoder) number(dst []byte, v float64, decimals, bits int) []byte {
	if math.IsNaN(v) {
		return append(dst, "nan"...)
	}
	start := len(dst)
	dst = strconv.AppendFloat(dst, v, 'f', decimals, bits)
	if e.style.DecimalComma {
		if i := bytes.IndexByte(dst[start:], '.'); i >= 0 {
			dst[start+i] = ','
		}
	}
	return dst
}

// A Writer writes a run to a stream, pixel after pixel, through one buffer.
type Writer struct {
	*Encoder
	w   io.Writer
	buf []byte
	err error
}

// NewWriter returns a writer and puts the header into its buffer.
func NewWriter(w io.Writer, axis []float64, style Style) *Writer {
	e := NewEncoder(axis, style)
	return &Writer{Encoder: e, w: w, buf: e.AppendHeader(nil)}
}

// Write writes a pixel. After an error, which it returns again, nothing more is written.
func (w *Writer) Write(x, y float64, counts []float32) error {
	w.buf = w.AppendPixel(w.buf, x, y, counts)
	if len(w.buf) >= 64<<10 {
		return w.Flush()
	}
	return w.err
}

// Flush writes what is still in the buffer. It must be called at the end.
func (w *Writer) Flush() error {
	if w.err == nil {
		_, w.err = w.w.Write(w.buf)
	}
	w.buf = w.buf[:0]
	return w.err
}

// Package npy writes and reads arrays in the NPY format, version 1.0, as numpy.load and numpy.save do: little-endian float32
// in C order. The format is published with NumPy (NEP 1, "A Simple File Format for NumPy Arrays", 2007).
package npy

import (
	"bufio"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"regexp"
	"strconv"
	"strings"
)

const magic = "\x93NUMPY\x01\x00"

// Write writes data as an array of that shape, whose product must be len(data).
func Write(w io.Writer, shape []int, data []float32) error {
	n := 1
	dims := make([]string, len(shape))
	for i, d := range shape {
		n *= d
		dims[i] = strconv.Itoa(d) + ","
	}
	if n != len(data) {
		panic(fmt.Sprintf("npy: shape %v does not hold %d numbers", shape, len(data)))
	}
	header := fmt.Sprintf("{'descr': '<f4', 'fortran_order': False, 'shape': (%s), }", strings.Join(dims, " "))
	// Magic, length and header with its newline fill a multiple of 64 bytes, so that the data are aligned.
	pad := (64 - (len(magic)+2+len(header)+1)%64) % 64
	header += strings.Repeat(" ", pad) + "\n"
	b := bufio.NewWriterSize(w, 1<<16)
	b.WriteString(magic)
	b.Write(binary.LittleEndian.AppendUint16(nil, uint16(len(header))))
	b.WriteString(header)
	var word [4]byte
	for _, v := range data {
		binary.LittleEndian.PutUint32(word[:], math.Float32bits(v))
		if _, err := b.Write(word[:]); err != nil {
			return err
		}
	}
	return b.Flush()
}

var (
	descr   = regexp.MustCompile(`'descr'\s*:\s*'([^']*)'`)
	fortran = regexp.MustCompile(`'fortran_order'\s*:\s*(True|False)`)
	shapes  = regexp.MustCompile(`'shape'\s*:\s*\(([0-9, ]*)\)`)
)

// Read reads an array that [Write] wrote. The error says what else it found. It allocates by what is there, not by what the
// header claims.
func Read(r io.Reader) (shape []int, data []float32, err error) {
	b := bufio.NewReaderSize(r, 1<<16)
	head := make([]byte, len(magic)+2)
	if _, err := io.ReadFull(b, head); err != nil || string(head[:len(magic)]) != magic {
		return nil, nil, errors.New("not an NPY file of version 1.0")
	}
	text := make([]byte, binary.LittleEndian.Uint16(head[len(magic):]))
	if _, err := io.ReadFull(b, text); err != nil {
		return nil, nil, errors.New("the file ends in its header")
	}
	find := func(e *regexp.Regexp) string {
		if m := e.FindSubmatch(text); m != nil {
			return string(m[1])
		}
		return ""
	}
	if kind := find(descr); kind != "<f4" {
		return nil, nil, fmt.Errorf("the numbers are %q, little-endian float32 (<f4) is read", kind)
	}
	if find(fortran) != "False" {
		return nil, nil, errors.New("the array is in Fortran order, C order is read")
	}
	if !shapes.Match(text) {
		return nil, nil, errors.New("the header has no shape")
	}
	n := 1
	for d := range strings.SplitSeq(find(shapes), ",") {
		if d = strings.TrimSpace(d); d == "" {
			continue
		}
		k, err := strconv.Atoi(d)
		if err != nil || k < 0 || k > 0 && n > math.MaxInt32/k {
			return nil, nil, fmt.Errorf("the shape (%s) is too large", find(shapes))
		}
		shape = append(shape, k)
		n *= k
	}
	data = make([]float32, 0, min(n, 1<<16))
	var word [4]byte
	for len(data) < n {
		if _, err := io.ReadFull(b, word[:]); err != nil {
			return nil, nil, fmt.Errorf("the file ends after %d of %d numbers", len(data), n)
		}
		data = append(data, math.Float32frombits(binary.LittleEndian.Uint32(word[:])))
	}
	if _, err := b.ReadByte(); err != io.EOF {
		return nil, nil, errors.New("something follows the array")
	}
	return shape, data, nil
}

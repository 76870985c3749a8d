package npy

import (
	"bytes"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

func TestBytes(t *testing.T) {
	var b bytes.Buffer
	if err := Write(&b, []int{2, 3}, []float32{0, 1, 2, 3, 4, 5}); err != nil {
		t.Fatal(err)
	}
	// By the format's description: magic, version, little-endian header length, a Python dictionary that ends in a newline, the
	// whole a multiple of 64 bytes; then the numbers.
	if !bytes.HasPrefix(b.Bytes(), []byte("\x93NUMPY\x01\x00")) {
		t.Errorf("begins with %q", b.Bytes()[:8])
	}
	length := int(b.Bytes()[8]) + int(b.Bytes()[9])<<8
	if (10+length)%64 != 0 || b.Bytes()[10+length-1] != '\n' || b.Len() != 10+length+24 {
		t.Errorf("header of %d bytes, file of %d", length, b.Len())
	}
	if got := b.Bytes()[10+length+4 : 10+length+8]; !bytes.Equal(got, []byte{0, 0, 0x80, 0x3f}) { // 1 in binary32
		t.Errorf("the number 1 is % x", got)
	}
}

func TestRoundTrip(t *testing.T) {
	for _, shape := range [][]int{{}, {1}, {0, 4}, {7}, {5, 3}, {2, 3, 4}} {
		n := 1
		for _, d := range shape {
			n *= d
		}
		data := make([]float32, n)
		for i := range data {
			data[i] = float32(math.Sqrt(float64(i)))
		}
		if n > 2 {
			data[2] = float32(math.Inf(1))
		}
		var b bytes.Buffer
		if err := Write(&b, shape, data); err != nil {
			t.Fatal(err)
		}
		gotShape, got, err := Read(&b)
		if err != nil || !slices.Equal(gotShape, shape) || !slices.Equal(got, data) {
			t.Errorf("shape %v: read %v %v, %v", shape, gotShape, got, err)
		}
	}
}

func TestNumPyReadsIt(t *testing.T) {
	python := "/usr/bin/python3"
	if exec.Command(python, "-c", "import numpy").Run() != nil {
		t.Skip("no python3 with NumPy here")
	}
	name := filepath.Join(t.TempDir(), "a.npy")
	f, err := os.Create(name)
	if err != nil {
		t.Fatal(err)
	}
	if err := Write(f, []int{2, 3}, []float32{0, 1, 2.5, float32(math.NaN()), -4, 5}); err != nil {
		t.Fatal(err)
	}
	f.Close()
	out, err := exec.Command(python, "-c", "import numpy,sys; a=numpy.load(sys.argv[1]); print(a.dtype, a.shape, a.tolist())", name).Output()
	if want := "float32 (2, 3) [[0.0, 1.0, 2.5], [nan, -4.0, 5.0]]\n"; err != nil || string(out) != want {
		t.Errorf("NumPy reads %q, want %q (%v)", out, want, err)
	}
}

func TestRefusals(t *testing.T) {
	var b bytes.Buffer
	if err := Write(&b, []int{2, 3}, make([]float32, 6)); err != nil {
		t.Fatal(err)
	}
	good := b.String()
	for _, test := range []struct{ old, with, want string }{
		{"<f4", ">f4", "little-endian"},
		{"False", "True ", "Fortran"},
		{"(2, 3,)", "(9999999999, 9999999999,)", "too large"},
		{"(2, 3,)", "(-2, 3)", "no shape"},
		{"(2, 3,)", "(2, 4,)", "ends after 6 of 8"},
		{"(2, 3,)", "(2, 2,)", "follows"},
		{"\x93NUMPY", "\x93NUMPI", "not an NPY"},
	} {
		if !strings.Contains(good, test.old) {
			t.Fatalf("%q is not in the file", test.old)
		}
		bad := strings.Replace(good, test.old, test.with, 1)
		bad = strings.Replace(bad, strings.Repeat(" ", max(0, len(test.with)-len(test.old))), "", 1) // keep the header's length
		if _, _, err := Read(strings.NewReader(bad)); err == nil || !strings.Contains(err.Error(), test.want) {
			t.Errorf("%q for %q: error %v, want one with %q", test.with, test.old, err, test.want)
		}
	}
	if _, _, err := Read(strings.NewReader(good[:40])); err == nil {
		t.Error("a file that ends in its header was read")
	}
	// A header may claim 2e9 numbers; memory must follow what is there.
	huge := strings.Replace(good, "(2, 3,)", "(2000000000,)", 1)
	if _, _, err := Read(strings.NewReader(strings.Replace(huge, "      ", "", 1))); err == nil {
		t.Error("a file of six numbers passed for one of 2e9")
	}
}

func FuzzRead(f *testing.F) {
	var b bytes.Buffer
	if err := Write(&b, []int{2, 3}, make([]float32, 6)); err != nil {
		f.Fatal(err)
	}
	f.Add(b.Bytes())
	f.Add([]byte("\x93NUMPY\x01\x00\x02\x00{}"))
	f.Fuzz(func(t *testing.T, data []byte) {
		shape, values, err := Read(bytes.NewReader(data))
		if err != nil {
			return
		}
		var b bytes.Buffer
		if err := Write(&b, shape, values); err != nil {
			t.Fatal(err)
		}
		if _, again, err := Read(&b); err != nil || len(again) != len(values) {
			t.Errorf("what was read cannot be written and read again: %v", err)
		}
	})
}

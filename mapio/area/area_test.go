package area

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"

	"bandgrid/mapio/scan"
)

const drawn = "\ufeff# tape and a pad\r\nname, x, y\r\ntape,0,0\r\ntape,4,0\r\ntape,4,2\r\ntape,0,2\r\npad,10,-10\r\npad,12,-10\r\npad,10,-8\r\n"

func TestRead(t *testing.T) {
	areas, err := Read(strings.NewReader(drawn), "areas.csv")
	if err != nil {
		t.Fatal(err)
	}
	if len(areas) != 2 || areas[0].Name != "tape" || len(areas[0].X) != 4 || areas[1].Y[2] != -8 {
		t.Fatalf("read %+v", areas)
	}
}

func TestContains(t *testing.T) {
	star := Area{X: []float64{0, 4, 4, 2, 0}, Y: []float64{0, 0, 4, 1, 4}} // a notch from above
	for _, test := range []struct {
		x, y float64
		want bool
	}{
		{2, 0.5, true}, {2, 2, false}, {0.2, 3, true}, {3.9, 3, true}, {-0.1, 1, false}, {4.1, 1, false}, {2, -0.1, false}, {2, 0.999, true},
	} {
		if got := star.Contains(test.x, test.y); got != test.want {
			t.Errorf("(%g, %g): inside %v", test.x, test.y, got)
		}
	}
	// The share of a lattice inside is the area: here by the shoelace formula 16 - 6.
	n := 0
	for i := range 400 {
		for j := range 400 {
			if star.Contains((float64(i)+0.5)/100, (float64(j)+0.5)/100) {
				n++
			}
		}
	}
	if got := float64(n) / 1e4; !(math.Abs(got-10) < 0.03) {
		t.Errorf("area %g, want 10", got)
	}
}

func TestReadRefuses(t *testing.T) {
	for text, want := range map[string]string{
		"":                                   "no area",
		"name,x,y\n":                         "no area",
		"tape,1,2\ntape,3,4\n":               "line 1: the header line is missing",
		"name,x,y\na,1,2\na,2,3\n":           `area "a" has 2 vertices`,
		"name,x,y\na,1,two\n":                "line 2: ",
		"name,x,y\na,1\n":                    "line 2: 2 values",
		"name,x,y\na,1,NaN\n":                "line 2: ",
		"name,x,y\na,0,0\nb,0,0\na,1,1\n":    "line 4: area \"a\" comes back",
		"name,x,y\na,\"0,0\n":                "not comma-separated",
		"\x00\x01\x02":                       "",
		strings.Repeat("a", maxBytes) + "\n": "larger than",
	} {
		_, err := Read(strings.NewReader(text), "areas.csv")
		var input *scan.InputError
		if !errors.As(err, &input) || !strings.HasPrefix(err.Error(), "areas.csv: ") || !strings.Contains(err.Error(), want) {
			t.Errorf("%.40q: %v", text, err)
		}
	}
}

func FuzzRead(f *testing.F) {
	f.Add(drawn)
	f.Fuzz(func(t *testing.T, text string) {
		areas, err := Read(strings.NewReader(text), "f")
		if _, ok := errors.AsType[*scan.InputError](err); err != nil && !ok {
			t.Errorf("%v: a refusal must be an InputError", err)
		}
		for _, a := range areas {
			a.Contains(a.X[0], a.Y[0])
		}
	})
}

func Example() {
	areas, err := Read(strings.NewReader("name,x,y\ntape,0,0\ntape,4,0\ntape,4,2\ntape,0,2\n"), "areas.csv")
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(areas[0].Name, areas[0].Contains(1, 1), areas[0].Contains(1, 3))
	// Output: tape true false
}

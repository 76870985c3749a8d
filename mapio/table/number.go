package table

import (
	"math"
	"strconv"
)

// A dialect says how fields are separated and numbers written. Blanks around a field mean nothing.
type dialect struct {
	sep     byte // tab, semicolon, comma, or a space for runs of blanks
	decimal byte // point or comma
}

// blank tells whether c is white space inside a line.
func blank(c byte) bool { return c == ' ' || c == '\t' || c == '\r' }

// The functions below take a line s that ends in '\n', which stops their loops.

// start returns where the first field of s begins.
func (d dialect) start(s []byte) int { return d.skip(s, 0) }

// skip passes over blanks that do not separate.
func (d dialect) skip(s []byte, i int) int {
	for blank(s[i]) && (s[i] != d.sep || d.sep == ' ') {
		i++
	}
	return i
}

// stop returns where the field whose text ends at i stops: at the separator or the line's end. It is -1 if there is more text.
func (d dialect) stop(s []byte, i int) int {
	if s[i] == d.sep || s[i] == '\n' {
		return i
	}
	if j := d.skip(s, i); j > i && (d.sep == ' ' || s[j] == d.sep || s[j] == '\n') {
		if d.sep == ' ' && s[j] != '\n' {
			return i
		}
		return j
	}
	return -1
}

// next returns where the field begins that follows the one that stopped at i, or -1 if there is none.
func (d dialect) next(s []byte, i int) int {
	if s[i] == '\n' {
		return -1
	}
	j := d.skip(s, i+1)
	if d.sep == ' ' && s[j] == '\n' {
		return -1
	}
	return j
}

// find returns where the field that begins at i stops, whatever is in it.
func (d dialect) find(s []byte, i int) int {
	if d.sep == ' ' {
		for s[i] != '\n' && !blank(s[i]) {
			i++
		}
		return d.stop(s, i)
	}
	for s[i] != '\n' && s[i] != d.sep {
		i++
	}
	return i
}

// pow10 are the powers of ten that a float64 holds exactly.
var pow10 = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18,
	1e19, 1e20, 1e21, 1e22}

// number reads the number in the field that begins at i and returns where the field stops. An empty field is NaN. ok is false
// where the field holds something else than a number.
//
// A mantissa below 2^53 and a power of ten up to 22 are both exact, so their product or quotient is correctly rounded; anything
// else is left to strconv.
func (d dialect) number(s []byte, i int) (v float64, stop int, ok bool) {
	j := i
	negative := s[j] == '-'
	if negative || s[j] == '+' {
		j++
	}
	var m uint64
	from := j
	for c := s[j] - '0'; c <= 9; c = s[j] - '0' {
		m = m*10 + uint64(c)
		j++
	}
	digits, exp := j-from, 0
	if s[j] == d.decimal && d.decimal != d.sep {
		j++
		from = j
		for c := s[j] - '0'; c <= 9; c = s[j] - '0' {
			m = m*10 + uint64(c)
			j++
		}
		digits += j - from
		exp = from - j
	}
	if digits == 0 || digits > 19 || s[j-1] == ',' {
		return d.slow(s, i)
	}
	if s[j]|0x20 == 'e' {
		k := j + 1
		minus := s[k] == '-'
		if minus || s[k] == '+' {
			k++
		}
		e, from := 0, k
		for c := s[k] - '0'; c <= 9 && k-from < 4; c = s[k] - '0' {
			e = e*10 + int(c)
			k++
		}
		if k == from {
			return d.slow(s, i)
		}
		if minus {
			e = -e
		}
		exp, j = exp+e, k
	}
	if stop = d.stop(s, j); stop < 0 || m >= 1<<53 || exp < -22 || exp > 22 {
		return d.slow(s, i)
	}
	if v = float64(m); exp < 0 {
		v /= pow10[-exp]
	} else {
		v *= pow10[exp]
	}
	if negative {
		v = -v
	}
	return v, stop, true
}

// slow is number for everything else: many digits, words for missing values, text.
func (d dialect) slow(s []byte, i int) (v float64, stop int, ok bool) {
	stop = d.find(s, i)
	end := stop
	for end > i && blank(s[end-1]) {
		end--
	}
	text := s[i:end]
	if missing(text) {
		return math.NaN(), stop, true
	}
	var small [64]byte
	plain := small[:0]
	for k, c := range text {
		switch {
		case c == d.decimal && d.decimal != d.sep:
			if c == ',' && k == len(text)-1 {
				return math.NaN(), stop, false
			}
			c = '.'
		case '0' <= c && c <= '9', c == '+', c == '-', c == 'e', c == 'E':
		default:
			return math.NaN(), stop, false
		}
		plain = append(plain, c) // grows, on the heap, only for numbers of more than 64 characters
	}
	v, err := strconv.ParseFloat(string(plain), 64)
	if e, bad := err.(*strconv.NumError); bad && e.Err != strconv.ErrRange {
		return math.NaN(), stop, false
	}
	return v, stop, true
}

// missing tells whether text stands for a value that is not there, or not finite.
func missing(text []byte) bool {
	if len(text) > 0 && (text[0] == '-' || text[0] == '+') {
		text = text[1:]
		if len(text) == 0 {
			return false
		}
	}
	if len(text) > len("infinity") {
		return false
	}
	var lower [8]byte
	for i, c := range text {
		if 'A' <= c && c <= 'Z' {
			c |= 0x20
		}
		lower[i] = c
	}
	switch string(lower[:len(text)]) {
	case "", "nan", "na", "n/a", "inf", "infinity":
		return true
	}
	return false
}

// count makes a detector count of a number: what is not finite is missing.
func count(v float64) float32 {
	if c := float32(v); c-c == 0 {
		return c
	}
	return float32(math.NaN())
}

// fields counts the fields of s.
func (d dialect) fields(s []byte) int {
	n := 0
	for i := d.start(s); i >= 0; i = d.next(s, d.find(s, i)) {
		n++
	}
	return n
}

// split appends the fields of s to cells.
func (d dialect) split(s []byte, cells [][]byte) [][]byte {
	for i := d.start(s); i >= 0; {
		stop := d.find(s, i)
		end := stop
		for end > i && blank(s[end-1]) {
			end--
		}
		cells = append(cells, s[i:end])
		i = d.next(s, stop)
	}
	return cells
}

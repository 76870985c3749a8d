package plot

import (
	"bytes"
	"encoding/binary"
	"hash/crc32"
	"image"
	"image/color"
	"image/png"
	"io"
	"math"
)

// PNG draws the figure and writes it with its resolution (pHYs) and its Meta as text chunks (PNG, ISO/IEC 15948): tEXt where
// Latin-1 holds it, iTXt otherwise.
func (f *Figure) PNG(w io.Writer) error {
	var buf bytes.Buffer
	encoder := png.Encoder{CompressionLevel: png.DefaultCompression}
	if err := encoder.Encode(&buf, flat(f.Image())); err != nil {
		return err
	}
	const head = 8 + 25 // signature and IHDR
	data := buf.Bytes()
	out := append([]byte(nil), data[:head]...)
	var phys [9]byte
	perMetre := uint32(math.Round(f.dpi() / 0.0254))
	binary.BigEndian.PutUint32(phys[0:], perMetre)
	binary.BigEndian.PutUint32(phys[4:], perMetre)
	phys[8] = 1
	out = chunk(out, "pHYs", phys[:])
	for _, m := range f.Meta {
		if latin, ok := latin1(m[1]); ok {
			out = chunk(out, "tEXt", append([]byte(m[0]+"\x00"), latin...))
		} else {
			out = chunk(out, "iTXt", []byte(m[0]+"\x00\x00\x00\x00\x00"+m[1]))
		}
	}
	_, err := w.Write(append(out, data[head:]...))
	return err
}

// flat uses a table of colours where 256 suffice, which halves the file of most maps; figures are opaque.
func flat(img *image.RGBA) image.Image {
	out := image.NewPaletted(img.Rect, nil)
	index := map[[3]uint8]uint8{}
	var last [3]uint8
	var lastIndex uint8
	for i, n := 0, len(out.Pix); i < n; i++ {
		p := [3]uint8(img.Pix[4*i : 4*i+3])
		if i == 0 || p != last {
			k, ok := index[p]
			if !ok {
				if len(index) == 256 {
					return img
				}
				k = uint8(len(index))
				index[p] = k
				out.Palette = append(out.Palette, color.NRGBA{p[0], p[1], p[2], 255})
			}
			last, lastIndex = p, k
		}
		out.Pix[i] = lastIndex
	}
	return out
}

func chunk(out []byte, kind string, body []byte) []byte {
	out = binary.BigEndian.AppendUint32(out, uint32(len(body)))
	start := len(out)
	out = append(append(out, kind...), body...)
	return binary.BigEndian.AppendUint32(out, crc32.ChecksumIEEE(out[start:]))
}

func latin1(s string) ([]byte, bool) {
	out := make([]byte, 0, len(s))
	for _, r := range s {
		if r > 255 || r == 0 {
			return nil, false
		}
		out = append(out, byte(r))
	}
	return out, true
}

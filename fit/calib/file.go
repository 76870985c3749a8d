package calib

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
)

// A File is what a calibration file holds.
type File struct {
	Axis     *Calibration `json:"axis,omitempty"`
	Response *Response    `json:"response,omitempty"`
}

// Write writes the file as JSON.
func (f *File) Write(w io.Writer) error {
	text, err := json.MarshalIndent(f, "", "  ")
	if err != nil {
		return err
	}
	_, err = w.Write(append(text, '\n'))
	return err
}

// Read reads a calibration file. It refuses unknown fields and whatever makes no sense.
func Read(r io.Reader) (*File, error) {
	data, err := io.ReadAll(io.LimitReader(r, 16<<20+1))
	if err != nil {
		return nil, err
	}
	if len(data) > 16<<20 {
		return nil, errors.New("a calibration is at most 16 MiB of JSON")
	}
	var f File
	dec := json.NewDecoder(bytes.NewReader(data))
	dec.DisallowUnknownFields()
	if err := dec.Decode(&f); err != nil {
		return nil, fmt.Errorf("it is not a calibration: %w; bandgrid calibrate makes one", err)
	}
	if f.Axis == nil && f.Response == nil {
		return nil, errors.New("there is neither an axis nor a response in it; bandgrid calibrate makes one")
	}
	if f.Axis != nil {
		if err := f.Axis.Check(); err != nil {
			return nil, fmt.Errorf("axis: %w", err)
		}
	}
	if f.Response != nil {
		if err := f.Response.Check(); err != nil {
			return nil, fmt.Errorf("response: %w", err)
		}
	}
	return &f, nil
}

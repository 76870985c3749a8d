package main

import (
	"fmt"
	"os"
	"slices"

	"bandgrid/fit"
	"bandgrid/fit/calib"
	"bandgrid/mapio/area"
	"bandgrid/mapio/scan"
)

// place reads what flags say of the places of pixels.
func (o *surveyOptions) place() error {
	o.places = fit.RunOptions{Workers: o.workers}
	for _, axis := range o.flip {
		switch axis {
		case "x":
			o.places.FlipX = true
		case "y":
			o.places.FlipY = true
		default:
			return usageError{fmt.Errorf("--flip %s: x, y or x,y is possible", axis)}
		}
	}
	if err := o.readCalibration(); err != nil {
		return err
	}
	if _, err := o.meaning.readLimits(); err != nil { // before hours of work
		return err
	}
	if o.exclude == "" {
		return nil
	}
	f, err := os.Open(o.exclude)
	if err != nil {
		return err
	}
	defer f.Close()
	areas, err := area.Read(f, o.exclude)
	if err != nil {
		return err
	}
	o.places.Leave = func(x, y float64) bool {
		return slices.ContainsFunc(areas, func(a area.Area) bool { return a.Contains(x, y) })
	}
	return nil
}

func (o *surveyOptions) readCalibration() error {
	if o.calibration == "" {
		return nil
	}
	f, err := os.Open(o.calibration)
	if err != nil {
		return err
	}
	defer f.Close()
	if o.calib, err = calib.Read(f); err != nil {
		return fmt.Errorf("%s: %w", o.calibration, err)
	}
	return nil
}

// calibrated returns the axis of a run as corrected.
func (o *surveyOptions) calibrated(sc *scan.Scan) (scan.Axis, error) {
	if o.calib == nil || o.calib.Axis == nil {
		return sc.Axis, nil
	}
	axis, err := o.calib.Axis.Apply(sc.Axis)
	if err != nil {
		return nil, &scan.InputError{File: sc.File, Pixel: -1, What: "its axis cannot be corrected", Err: err, Remedy: "calibrate with the same grating position"}
	}
	return axis, nil
}

// prepare sets what is done to the counts of a run with that axis, as corrected.
func (o *surveyOptions) prepare(plan *fit.Plan) {
	if o.dark != 0 {
		plan.Preparation.Dark = []float64{o.dark}
	}
	if o.bare != nil {
		plan.Preparation.Substrate = o.bare.On(plan.Axis)
	}
	if o.calib != nil && o.calib.Response != nil {
		plan.Preparation.Response = o.calib.Response.On(plan.Axis)
	}
}

// describeCalibration says in words what was corrected, and how well, for the report.
func describeCalibration(f *calib.File) (list []string) {
	if c := f.Axis; c != nil {
		list = append(list, "Shift axis corrected: "+c.Summary()+".")
		for _, at := range []struct {
			band  string
			shift float64
		}{{"G", 1582}, {"2D", 2670}} {
			text := fmt.Sprintf("All %s positions share an error of %.2f cm-1 from that.", at.band, c.SE(at.shift))
			if !c.Bracketed(at.shift) {
				text = fmt.Sprintf("No line of the reference lies beyond %s: its positions are corrected by extrapolation, and how well is not known.", at.band)
			}
			list = append(list, text)
		}
	}
	if r := f.Response; r != nil {
		text := "Counts corrected for the relative response of the spectrometer: " + r.From + "."
		if se, err := r.RatioSE(1582, 2670); err == nil {
			text += fmt.Sprintf(" All 2D/G ratios share an error of %.1f %% from that.", 100*se)
		}
		list = append(list, text)
	}
	return list
}

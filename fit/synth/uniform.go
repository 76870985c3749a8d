package synth

// Uniform returns a scene of n pixels in a row, all of one material, which fills the spot: for tests of fits. The material is an
// [Object] without its shape, either layers with their fields or bands by numbers; instrument and seed are as in a [Scene]. It
// panics where the scene does not hold together.
//
//	scene := synth.Uniform(1000, synth.Object{Layers: 1, Bands: []synth.Band{
//		{Name: "g", Position: 1583, Width: 14, Height: 300},
//		{Name: "2d", Position: 2675, Width: 28, Height: 800},
//	}}, synth.Instrument{Background: 200, Gain: 2, ReadNoise: 5}, 1)
func Uniform(n int, material Object, instrument Instrument, seed uint64) *Scene {
	material.Shape = Shape{Everywhere: true}
	s := &Scene{Seed: seed, Stage: Stage{Cols: n, Rows: 1}, Instrument: instrument, Objects: []Object{material}}
	if err := s.Prepare(); err != nil {
		panic("synth: " + err.Error())
	}
	return s
}

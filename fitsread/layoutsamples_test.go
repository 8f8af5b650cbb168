package fitsread

// layoutSamples are invented files, one of the kind of each file in
// configs/layouts.
func layoutSamples() map[string][]byte {
	return nil
}

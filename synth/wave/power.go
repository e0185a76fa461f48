package wave

// Power returns the power at a frequency [Hz] of a train that has travelled for tau [s], in
// a unit of its own.
func (d *Driver) Power(f, tau float64) float64 {
	g := d.damping(f, tau)
	return g * g * d.s.Spectrum.Power(f)
}

package main

import (
	"fmt"
	"strings"

	"github.com/spf13/cobra"

	"offplane/synth/obs"
)

// ownFrames are the flags that describe an observation that offplane did not write.
type ownFrames struct {
	u                                     obs.UserData
	axes, wavelengths, wavelengths2, move string
}

func (o *ownFrames) flags(cmd *cobra.Command) {
	f := cmd.Flags()
	f.StringVar(&o.u.Second, "second-line", "", "own frames: `FILE[EXT]` with the tunings of the second line")
	f.StringVar(&o.u.Density, "density", "", "own frames: `FILE[EXT]` with a map of the electron density, in place of the second line")
	f.StringVar(&o.u.Ratio, "ratio", "", "own frames: `FILE[EXT]` with a map of the ratio of the lines' energies, in place of the second line")
	f.StringVar(&o.axes, "axes", "", "own frames: what the axes are, such as x,y,wavelength,time, if the header does not say")
	f.StringVar(&o.wavelengths, "wavelengths", "", "own frames: wavelengths of the first line's tunings in vacuum [nm]")
	f.StringVar(&o.wavelengths2, "wavelengths-2", "", "own frames: those of the second line [nm]")
	f.StringVar(&o.move, "wavelength-shift", "", "own frames: true wavelength minus that of the header [nm], of one line or both")
	f.Float64Var(&o.u.FilterFWHM, "filter", 0, "own frames: full width at half maximum of the filter [`nm`]")
	f.IntVar(&o.u.Stages, "stages", 0, "own frames: stages of a birefringent filter; 0: Gaussian")
	f.Float64Var(&o.u.Cadence, "cadence", 0, "own frames: time between frames [`s`]")
	f.StringVar(&o.u.Unit, "unit", "", "own frames: unit of Doppler shifts: km/s, m/s, cm/s or nm")
	f.Float64Var(&o.u.Electrons, "electrons", 0, "own frames: detected electrons per unit of the frames; 0: not known, and then no error of the density")
}

// ownNames are the names of those flags.
var ownNames = []string{"second-line", "density", "ratio", "axes", "wavelengths", "wavelengths-2", "wavelength-shift", "filter", "stages", "cadence", "unit", "electrons"}

// read reads an observation of ours or of somebody's own.
func (o *ownFrames) read(cmd *cobra.Command, path string, rest [2]float64) (*obs.Observation, error) {
	ours, err := obs.IsObservation(path)
	if err != nil {
		return nil, err
	}
	if ours {
		for _, name := range ownNames {
			if cmd.Flags().Changed(name) {
				return nil, fmt.Errorf("--%s describes frames that offplane did not write; %s says it itself", name, path)
			}
		}
		return readFrames(path)
	}
	u := o.u
	u.First, u.Rest = path, rest
	if o.axes != "" {
		for _, a := range strings.Split(o.axes, ",") {
			u.Axes = append(u.Axes, strings.TrimSpace(a))
		}
	}
	for i, w := range [2]string{o.wavelengths, o.wavelengths2} {
		if w == "" {
			continue
		}
		if u.Wavelengths[i], err = numbers([2]string{"wavelengths", "wavelengths-2"}[i], w); err != nil {
			return nil, err
		}
	}
	if o.move != "" {
		shift, err := numbers("wavelength-shift", o.move)
		if err != nil {
			return nil, err
		}
		if len(shift) > 2 {
			return nil, fmt.Errorf("--wavelength-shift %s: one number, or one for each line", o.move)
		}
		copy(u.Shift[:], shift)
	}
	return obs.ReadUserData(u)
}

// inputs are the files that belong to the frames.
func (o *ownFrames) inputs() []string {
	var paths []string
	for _, p := range []string{o.u.Second, o.u.Density, o.u.Ratio} {
		if file, _ := splitExtension(p); file != "" {
			paths = append(paths, file)
		}
	}
	return paths
}

package line_test

import (
	"fmt"

	"offplane/synth/line"
)

// The electron density where the 1079.8 nm line has 0.356 of the energy of the
// 1074.7 nm line, at 1.1 solar radii and 1.6 MK: close to 1e8 per cm^3, as the
// calculation behind the embedded data has it (derived). An error of 1 % in the ratio
// is one of 2.0 % in the density.
func ExampleDensity() {
	atom := line.Default()
	m, err := line.New(atom, atom.Options())
	if err != nil {
		fmt.Println(err)
		return
	}
	n, slope, err := line.Density(m, 0.356, 1.6e6, 1.1)
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("n = %.2e cm^-3, slope %.1f\n", n, slope)
	_, _, err = line.Density(m, 1.2, 1.6e6, 1.1)
	fmt.Println(err)
	// Output:
	// n = 1.00e+08 cm^-3, slope 2.0
	// ratio 1.2 is above the range 0.03613..1.052 that can be reached
}

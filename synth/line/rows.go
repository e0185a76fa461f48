package line

// A Row is the state of the pair at one density, height and temperature, with the
// field names of `offplane line --json`.
type Row struct {
	Density     float64   `json:"n_e_cm3"`
	Height      float64   `json:"height_rsun"` // heliocentric distance
	Temperature float64   `json:"temperature_K"`
	Emissivity1 float64   `json:"emissivity_1074_erg_cm3_s_sr"`
	Emissivity2 float64   `json:"emissivity_1079_erg_cm3_s_sr"`
	Ratio       float64   `json:"ratio_1079_1074"` // of energies
	Exponent1   float64   `json:"exponent_1074"`   // d ln j / d ln n_e at fixed T and height
	Exponent2   float64   `json:"exponent_1079"`
	Populations []float64 `json:"populations"` // in the order of the data file; they sum to 1
}

// Rows returns one row for each combination of densities [cm^-3], heights [solar
// radii] and temperatures [K], the last varying fastest. The error is a
// *RangeError for the first combination outside the range of the model.
func Rows(m *Model, densities, heights, temperatures []float64) ([]Row, error) {
	var rows []Row
	for _, n := range densities {
		for _, r := range heights {
			for _, t := range temperatures {
				p, err := m.Populations(n, t, r)
				if err != nil {
					return nil, err
				}
				j1, j2 := m.Emissivities(n, t, r)
				p1, p2 := Exponents(m, n, t, r)
				rows = append(rows, Row{n, r, t, j1, j2, j2 / j1, p1, p2, p})
			}
		}
	}
	return rows, nil
}

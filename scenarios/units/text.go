package units

// The text side of every quantity: String prints number and canonical unit,
// UnmarshalText reads a number and any unit of the quantity and leaves the receiver
// alone on error, Want says what to write.

// String returns the number and its canonical unit.
func (q Angle) String() string { return angle.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Angle) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Angle) UnmarshalText(text []byte) error { return read((*float64)(q), angle, text) }

// Want says what to write.
func (q Angle) Want() string { return angle.want() }

// String returns the number and its canonical unit.
func (q SkyAngle) String() string { return skyAngle.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q SkyAngle) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *SkyAngle) UnmarshalText(text []byte) error { return read((*float64)(q), skyAngle, text) }

// Want says what to write.
func (q SkyAngle) Want() string { return skyAngle.want() }

// String returns the number and its canonical unit.
func (q Distance) String() string { return distance.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Distance) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Distance) UnmarshalText(text []byte) error { return read((*float64)(q), distance, text) }

// Want says what to write.
func (q Distance) Want() string { return distance.want() }

// String returns the number and its canonical unit.
func (q Height) String() string { return height.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Height) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Height) UnmarshalText(text []byte) error { return read((*float64)(q), height, text) }

// Want says what to write.
func (q Height) Want() string { return height.want() }

// String returns the number and its canonical unit.
func (q Length) String() string { return length.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Length) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Length) UnmarshalText(text []byte) error { return read((*float64)(q), length, text) }

// Want says what to write.
func (q Length) Want() string { return length.want() }

// String returns the number and its canonical unit.
func (q Duration) String() string { return duration.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Duration) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Duration) UnmarshalText(text []byte) error { return read((*float64)(q), duration, text) }

// Want says what to write.
func (q Duration) Want() string { return duration.want() }

// String returns the number and its canonical unit.
func (q Frequency) String() string { return frequency.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Frequency) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Frequency) UnmarshalText(text []byte) error { return read((*float64)(q), frequency, text) }

// Want says what to write.
func (q Frequency) Want() string { return frequency.want() }

// String returns the number and its canonical unit.
func (q Temperature) String() string { return temperature.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Temperature) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Temperature) UnmarshalText(text []byte) error { return read((*float64)(q), temperature, text) }

// Want says what to write.
func (q Temperature) Want() string { return temperature.want() }

// String returns the number and its canonical unit.
func (q Field) String() string { return field.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Field) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Field) UnmarshalText(text []byte) error { return read((*float64)(q), field, text) }

// Want says what to write.
func (q Field) Want() string { return field.want() }

// String returns the number and its canonical unit.
func (q Speed) String() string { return speed.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Speed) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Speed) UnmarshalText(text []byte) error { return read((*float64)(q), speed, text) }

// Want says what to write.
func (q Speed) Want() string { return speed.want() }

// String returns the number and its canonical unit.
func (q Density) String() string { return density.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Density) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Density) UnmarshalText(text []byte) error { return read((*float64)(q), density, text) }

// Want says what to write.
func (q Density) Want() string { return density.want() }

// String returns the number and its canonical unit.
func (q Wavelength) String() string { return wavelength.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Wavelength) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Wavelength) UnmarshalText(text []byte) error { return read((*float64)(q), wavelength, text) }

// Want says what to write.
func (q Wavelength) Want() string { return wavelength.want() }

// String returns the number and its canonical unit.
func (q Diameter) String() string { return diameter.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Diameter) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Diameter) UnmarshalText(text []byte) error { return read((*float64)(q), diameter, text) }

// Want says what to write.
func (q Diameter) Want() string { return diameter.want() }

// String returns the number and its canonical unit.
func (q Brightness) String() string { return brightness.format(float64(q)) }

// MarshalText writes what String returns. It never fails.
func (q Brightness) MarshalText() ([]byte, error) { return []byte(q.String()), nil }

// UnmarshalText reads a number and a unit.
func (q *Brightness) UnmarshalText(text []byte) error { return read((*float64)(q), brightness, text) }

// Want says what to write.
func (q Brightness) Want() string { return brightness.want() }

func read(into *float64, k kind, text []byte) error {
	v, err := k.parse(text)
	if err == nil {
		*into = v
	}
	return err
}

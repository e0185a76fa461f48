// Package scenarios describes WHAT is simulated: plain structs read from strict
// YAML, and the embedded scenarios. It holds no physics.
//
// Every struct field carries its YAML key, its allowed range (tag "in", written
// with the unit the user would write; ">" makes a bound exclusive) or its allowed
// words (tag "one"), and one line for people (tag "about"); package strict enforces
// them and explains the tag "choice". Rules that tie keys together are in Validate.
package scenarios

import "offplane/scenarios/units"

// A Scenario is one complete virtual observation and its inversion.
type Scenario struct {
	About     string    `yaml:"about" about:"one line that says what this is"`
	Seed      uint64    `yaml:"seed" about:"addresses every random number of the run"`
	Observer  Observer  `yaml:"observer"`
	Corona    Corona    `yaml:"corona"`
	Waves     Waves     `yaml:"waves"`
	Line      Line      `yaml:"line"`
	Sight     Sight     `yaml:"sight"`
	Image     Image     `yaml:"image"`
	Camera    Camera    `yaml:"camera"`
	Inversion Inversion `yaml:"inversion"`
}

// Observer says from where and when the corona is seen.
type Observer struct {
	Latitude  units.Angle    `yaml:"latitude" in:"-90 deg..90 deg" about:"heliographic latitude B0; positive tips the north pole toward the observer"`
	Longitude units.Angle    `yaml:"longitude" in:"-360 deg..360 deg" about:"heliographic longitude (Stonyhurst)"`
	Distance  units.Distance `yaml:"distance" in:">0.05 au..10 au" about:"distance from the Sun's centre"`
	Start     units.Date     `yaml:"start" about:"UTC of the first frame"`
}

// Corona is the truth: field, density, temperature, composition.
type Corona struct {
	Grid        *Grid        `yaml:"grid" about:"the user's own corona from a file, in place of fields, belt, density and temperature"`
	Fields      []Field      `yaml:"fields" about:"magnetic field components; they add"`
	Belt        *Belt        `yaml:"belt" about:"tilt and warp of dipole_sheet fields and of the latitudes of density laws"`
	Density     Density      `yaml:"density"`
	Temperature Temperature  `yaml:"temperature"`
	ClosedBelow units.Height `yaml:"closed_below" in:">1 Rsun..5 Rsun" about:"lines with an apex above this count as open"`
	Helium      float64      `yaml:"helium" in:"0..0.5" about:"He/H by number; sets mu and the proton share"`
	Nonthermal  units.Speed  `yaml:"nonthermal" in:"0 km/s..200 km/s" about:"1/e speed of unresolved motions at waves.at_density; scales as n^(-1/4)"`
	Strands     *Strands     `yaml:"strands" about:"fine structure of the density across the field"`
	Mix         *Mix         `yaml:"mix" about:"unresolved dense and thin plasma side by side"`
	Outflow     *Outflow     `yaml:"outflow" about:"steady flow along open field lines"`
	Rotation    *Rotation    `yaml:"rotation" about:"rigid rotation about the solar axis: a steady Doppler shift"`
}

// Grid names a FITS file; see model.ReadGrid for its format.
type Grid struct {
	File string `yaml:"file" need:"given" about:"FITS file with NE, T, BR, BTHETA, BPHI on R, THETA, PHI"`
}

// Belt is the geometry of the streamer belt; see model for the formula of the warp.
type Belt struct {
	Tilt      units.Angle `yaml:"tilt" in:"0 deg..90 deg" about:"between the belt's axis and the Sun's"`
	Toward    units.Angle `yaml:"toward" in:"-360 deg..360 deg" about:"longitude toward which the axis is tipped"`
	Warp      units.Angle `yaml:"warp" in:"0 deg..30 deg" about:"greatest shift of the belt in latitude"`
	Waves     int         `yaml:"waves" in:"1..8" about:"of the warp, around the Sun"`
	Longitude units.Angle `yaml:"longitude" in:"-360 deg..360 deg" about:"at which the warp is greatest to the north"`
}

// Prefill gives the warp, if there is one, two waves.
func (b *Belt) Prefill() { b.Waves = 2 }

// Strands is a log-normal density factor, constant along field lines.
type Strands struct {
	Size   units.Length `yaml:"size" in:"0.1 Mm..100 Mm" about:"at the surface"`
	Spread float64      `yaml:"spread" in:"0..1.5" about:"standard deviation of ln n"`
	Waves  string       `yaml:"waves" one:"collective,own" about:"collective: all strands move at the speed of the mean density; own: each rides its own density"`
}

// Prefill makes strands that move together.
func (s *Strands) Prefill() { s.Size, s.Spread, s.Waves = 1, 0.5, "collective" }

// Mix is a two-component plasma below every scale of the observation.
type Mix struct {
	Filling  float64 `yaml:"filling" in:">0..<1" about:"share of the volume that is dense"`
	Contrast float64 `yaml:"contrast" in:"1..1000" about:"dense over thin"`
	Tubes    string  `yaml:"tubes" one:"bundle,isolated" about:"bundle: the wave feels the mean density; isolated: the mean of dense and thin, for few thin tubes"`
}

// Prefill makes a bundle.
func (m *Mix) Prefill() { m.Filling, m.Contrast, m.Tubes = 0.3, 3, "bundle" }

// Outflow is u(r) = Terminal (1 - 1/r)^Exponent along open lines.
type Outflow struct {
	Terminal units.Speed `yaml:"terminal" in:">0 km/s..1000 km/s" about:"far from the Sun"`
	Exponent float64     `yaml:"exponent" in:"0.5..10"`
}

// Prefill makes the usual velocity law.
func (o *Outflow) Prefill() { o.Exponent = 1 }

// Rotation is that of a rigid corona.
type Rotation struct {
	Period units.Duration `yaml:"period" in:"100 h..2000 h" about:"as the observer sees it"`
}

// Prefill gives the synodic Carrington period, 27.2753 days.
func (r *Rotation) Prefill() { r.Period = 27.2753 * 86400 }

// A Field is exactly one of its members.
type Field struct {
	DipoleSheet *DipoleSheet `yaml:"dipole_sheet" choice:"field" about:"dipole, octupole and azimuthal current sheet (Banaszkiewicz et al. 1998, A&A 337, 940)"`
	Radial      *Radial      `yaml:"radial" choice:"field" about:"radial test field, falling as a power of r; r^-2 is free of divergence"`

	SourceSurface *SourceSurface `yaml:"source_surface" choice:"field" about:"potential field of a table of harmonics with source surface (Schatten, Wilcox & Ness 1969, Sol. Phys. 6, 442)"`
	BuriedDipole  *BuriedDipole  `yaml:"buried_dipole" choice:"field" about:"point dipole below the surface: an active region"`
	Uniform       *Uniform       `yaml:"uniform" choice:"field" about:"uniform test field"`
}

// SourceSurface: see model.Harmonics for the table.
type SourceSurface struct {
	Table  string       `yaml:"table" about:"file of coefficients; empty: the embedded example"`
	Height units.Height `yaml:"height" in:">1.2 Rsun..10 Rsun" about:"of the source surface"`
	Factor float64      `yaml:"factor" in:"-1000..1000" about:"multiplies the coefficients"`
}

// Prefill puts the source surface at its usual place.
func (f *SourceSurface) Prefill() { f.Height, f.Factor = 2.5, 1 }

// BuriedDipole: see model.BuriedDipole for the formula.
type BuriedDipole struct {
	Latitude  units.Angle  `yaml:"latitude" in:"-90 deg..90 deg"`
	Longitude units.Angle  `yaml:"longitude" in:"-360 deg..360 deg"`
	Depth     units.Length `yaml:"depth" in:"10 Mm..500 Mm"`
	Strength  units.Field  `yaml:"strength" in:">0 G..5000 G" about:"at the surface straight above"`
	Heading   units.Angle  `yaml:"heading" in:"-360 deg..360 deg" about:"of the moment, from west toward north"`
	Elevation units.Angle  `yaml:"elevation" in:"-90 deg..90 deg" about:"of the moment above the horizontal"`
}

// Prefill puts the dipole where its loops reach the field of view.
func (f *BuriedDipole) Prefill() { f.Depth = 100 }

// Uniform points to a latitude and longitude of the sky.
type Uniform struct {
	Strength  units.Field `yaml:"strength" in:">0 G..1000 G"`
	Latitude  units.Angle `yaml:"latitude" in:"-90 deg..90 deg"`
	Longitude units.Angle `yaml:"longitude" in:"-360 deg..360 deg"`
}

// DipoleSheet: see model.DipoleSheet for the formula.
type DipoleSheet struct {
	Strength units.Field  `yaml:"strength" in:">0 G..1000 G" about:"M"`
	Sheet    units.Height `yaml:"sheet" in:"0.1 Rsun..100 Rsun" about:"a1, depth of the image monopole that makes the current sheet"`
	Octupole float64      `yaml:"octupole" in:"-10..10" about:"Q, strength of the l = 3 term"`
}

// Radial is B = Strength r^-Exponent along r.
type Radial struct {
	Strength units.Field `yaml:"strength" in:">0 G..1000 G" about:"at the surface"`
	Exponent float64     `yaml:"exponent" in:"0..6"`
}

// Density ties two laws to the field's topology.
type Density struct {
	Streamer Law         `yaml:"streamer" about:"inside the closed region and around the sheet; everywhere if there is no hole"`
	Hole     *Law        `yaml:"hole" about:"on open field lines"`
	Boundary units.Angle `yaml:"boundary" in:">0 deg..30 deg" about:"half-width in footpoint latitude of the passage from streamer to hole"`
	Active   []Active    `yaml:"active" about:"denser plasma on the field lines of active regions; it adds"`
}

// Active is the plasma on the field lines that are rooted around a point: its share
// falls with the distance d of the footpoints as exp(-(d/Radius)^2).
type Active struct {
	Latitude    units.Angle       `yaml:"latitude" in:"-90 deg..90 deg"`
	Longitude   units.Angle       `yaml:"longitude" in:"-360 deg..360 deg"`
	Radius      units.Length      `yaml:"radius" in:"10 Mm..500 Mm" about:"1/e, of the footpoints' distance"`
	Law         Law               `yaml:"law"`
	Temperature units.Temperature `yaml:"temperature" in:"0.64 MK..5 MK"`
}

// Prefill makes a usual active region; without this its law would have to be written.
func (a *Active) Prefill() {
	a.Radius, a.Temperature = 150, 2
	a.Law = Law{Named: "vrsnak-2004", Factor: 1}
}

// A Law is exactly one of its members, times Factor.
type Law struct {
	Named       string       `yaml:"named" choice:"law" one:"baumbach-allen,cranmer-1999-hole,doyle-1999-hole,gibson-1999,guhathakurta-1996,guhathakurta-1996-pole,guhathakurta-1996-sheet,leblanc-1998,mann-1999,newkirk-1961,saito-1970,saito-1970-equator,saito-1970-pole,saito-poland-munro-1977,sittler-guhathakurta-1999,sittler-guhathakurta-1999-pole,vrsnak-2004" about:"a published profile by author and year"`
	PowerLaw    *PowerLaw    `yaml:"power_law" choice:"law"`
	Hydrostatic *Hydrostatic `yaml:"hydrostatic" choice:"law"`
	Factor      float64      `yaml:"factor" in:">0..1000" about:"multiplies the law"`
}

// PowerLaw is n = Surface r^-Exponent.
type PowerLaw struct {
	Surface  units.Density `yaml:"surface" in:">0 cm-3..1e12 cm-3"`
	Exponent float64       `yaml:"exponent" in:"0..30"`
}

// Hydrostatic is the isothermal hydrostatic law (PowerLaw's physical cousin).
type Hydrostatic struct {
	Surface     units.Density     `yaml:"surface" in:">0 cm-3..1e12 cm-3"`
	Temperature units.Temperature `yaml:"temperature" in:"0.3 MK..10 MK"`
}

// Temperature per region, blended like the density.
type Temperature struct {
	Streamer units.Temperature `yaml:"streamer" in:"0.64 MK..5 MK"`
	Hole     units.Temperature `yaml:"hole" in:"0.64 MK..5 MK"`
	Profile  *Profile          `yaml:"profile" about:"fall with height of both; without it they are isothermal"`
}

// Profile multiplies a temperature by (a+1)/(a + b r^alpha + (1-b) r^-beta) (Vasquez,
// van Ballegooijen & Raymond 2003, ApJ 598, 1361; form from memory).
type Profile struct {
	A     float64 `yaml:"a" in:"0..10"`
	B     float64 `yaml:"b" in:"0..1"`
	Alpha float64 `yaml:"alpha" in:"0..10"`
	Beta  float64 `yaml:"beta" in:"0..20"`
}

// Waves is the random kink-wave driver.
type Waves struct {
	Amplitude  units.Speed   `yaml:"amplitude" in:"0 km/s..100 km/s" about:"rms of one polarisation of the outward train before damping, at at_density"`
	AtDensity  units.Density `yaml:"at_density" in:">0 cm-3..1e12 cm-3" about:"density at which amplitude and nonthermal hold"`
	Growth     string        `yaml:"growth" one:"wkb,none" about:"wkb: amplitude ~ n^(-1/4); none: the same everywhere"`
	Cell       units.Length  `yaml:"cell" in:"0.5 Mm..100 Mm" about:"coherence scale of the driver at the surface"`
	Spectrum   Spectrum      `yaml:"spectrum"`
	Damping    float64       `yaml:"damping" in:"0..1000" about:"damping length over wavelength, xi_E; 0: no damping"`
	Inward     float64       `yaml:"inward" in:"0..10" about:"power of the inward train launched at inward_from on open lines, over the undamped outward power; 0: none"`
	InwardFrom units.Height  `yaml:"inward_from" in:">1 Rsun..5 Rsun"`
	FarEnd     bool          `yaml:"far_end" about:"on closed lines, also the train launched at the far end"`
}

// Spectrum is P(f) = slope part + floor + bump between Low and High, scaled to unit variance.
type Spectrum struct {
	Slope     float64         `yaml:"slope" in:"0..5" about:"alpha of the f^-alpha part"`
	Floor     float64         `yaml:"floor" in:"0..100" about:"white part, over the power-law part at bump_at"`
	Bump      float64         `yaml:"bump" in:"0..1000" about:"peak of the log-normal bump, over the power-law part at bump_at"`
	BumpAt    units.Frequency `yaml:"bump_at" in:"0.1 mHz..50 mHz"`
	BumpWidth float64         `yaml:"bump_width" in:">0..3" about:"sigma in ln f"`
	Low       units.Frequency `yaml:"low" in:"0.01 mHz..50 mHz"`
	High      units.Frequency `yaml:"high" in:"0.1 mHz..100 mHz"`
}

// Line says which atomic data make the light.
type Line struct {
	Data       string  `yaml:"data" about:"file of atomic data; empty: the embedded set"`
	Ionisation string  `yaml:"ionisation" one:"modern,arnaud-raymond-1992" about:"which ion-fraction column"`
	Iron       float64 `yaml:"iron" in:"5..9" about:"A(Fe) = 12 + log10(Fe/H)"`
	Photo      float64 `yaml:"photo" in:"0..10" about:"multiplies the disc's radiation; 1 is the Sun's"`
}

// Sight is how the line of sight is integrated.
type Sight struct {
	Plane bool         `yaml:"plane" about:"true: only the plane of the sky emits (method tests)"`
	Step  float64      `yaml:"step" in:"0.05..1.5" about:"sample spacing over cell * r where a ray shines; up to four times that where it is dark"`
	Reach units.Height `yaml:"reach" in:"0.2 Rsun..10 Rsun" about:"farthest sample from the plane of the sky; integration may stop earlier once the rest is below tail"`
	Tail  float64      `yaml:"tail" in:"1e-6..0.01" about:"share of either line's emission that may be left out at each end"`
}

// Image is the field of view.
type Image struct {
	Pixel units.SkyAngle `yaml:"pixel" in:"0.1 arcsec..60 arcsec"`
	Inner units.Height   `yaml:"inner" in:"1.01 Rsun..3 Rsun"`
	Outer units.Height   `yaml:"outer" in:">1.01 Rsun..3 Rsun"`
	From  units.Angle    `yaml:"from" in:"-360 deg..360 deg" about:"first position angle of the wedge, counter-clockwise from north"`
	To    units.Angle    `yaml:"to" in:"-360 deg..720 deg" about:"last position angle of the wedge; from + 360 deg is the full ring"`
	Roll  units.Angle    `yaml:"roll" in:"-180 deg..180 deg" about:"rotation of the image's +y from solar north, counter-clockwise"`
}

// Camera is what stands between the radiance and the frames. Each of its stages is
// off at zero or null.
type Camera struct {
	Like string `yaml:"like" one:"none,20cm-4.35arcsec,20cm-3arcsec,50cm-3arcsec,150cm-2arcsec" about:"an example camera that stands for what is not written here and for image.pixel"`

	Cadence    units.Duration     `yaml:"cadence" in:"0.1 s..600 s" about:"time between frames of the first line"`
	Duration   units.Duration     `yaml:"duration" in:"60 s..48 h"`
	Tunings    []units.Wavelength `yaml:"tunings" in:"-5 nm..5 nm" about:"offsets from the rest wavelength, ascending, of both lines"`
	Filter     units.Wavelength   `yaml:"filter" in:"0.005 nm..1 nm" about:"full width at half maximum of the transmission"`
	Stages     int                `yaml:"stages" in:"0..6" about:"of a birefringent filter, whose transmission is a product of cos^2; 0: Gaussian transmission"`
	Sequential bool               `yaml:"sequential" about:"tunings one after the other, not all at once"`
	TuningTime units.Duration     `yaml:"tuning_time" in:"0 s..600 s" about:"from one tuning to the next, if sequential; 0: the cadence evenly divided"`
	Order      []int              `yaml:"order" in:"0..100" about:"in which the tunings are taken, counted from 0 by wavelength; empty: ascending"`
	DeadTime   units.Duration     `yaml:"dead_time" in:"0 s..600 s" about:"of each tuning: setting the filter and reading"`
	SecondLine int                `yaml:"second_line" in:"1..10000" about:"frames of the second line, evenly spread over the duration"`
	Switching  string             `yaml:"switching" one:"together,interleaved,blocks" about:"second line: at the same time as the first, after it within its cadence, or instead of it"`
	Blocks     int                `yaml:"blocks" in:"1..1000" about:"in how many runs the frames of the second line come, if switching is blocks"`

	PointSpread units.SkyAngle   `yaml:"point_spread" in:"0 arcsec..30 arcsec" about:"full width at half maximum of a Gaussian point spread; 0: none"`
	Diffraction bool             `yaml:"diffraction" about:"of the round aperture"`
	Seeing      units.SkyAngle   `yaml:"seeing" in:"0 arcsec..10 arcsec" about:"full width at half maximum of the long-exposure seeing; 0: none"`
	Scatter     *Scatter         `yaml:"scatter" about:"light scattered far; null: none"`
	Pointing    *Pointing        `yaml:"pointing" about:"errors of the pointing; null: none"`
	Occulter    *Occulter        `yaml:"occulter" about:"null: none"`
	FieldStop   units.Height     `yaml:"field_stop" in:"0 Rsun..5 Rsun" about:"radius of the field stop; 0: none"`
	Background  units.Brightness `yaml:"background" in:"0 ppm..1000 ppm" about:"sky and instrument, millionths of the disc-centre continuum"`
	KCorona     float64          `yaml:"k_corona" in:"0..100" about:"continuum of the corona, over that of Baumbach 1937, AN 263, 121; 0: none"`
	Brightening float64          `yaml:"brightening" in:"-10..10" about:"growth of ln(transmission of the sky) in an hour"`

	Noise      bool           `yaml:"noise" about:"photon and read noise"`
	Aperture   units.Diameter `yaml:"aperture" in:"1 cm..1000 cm"`
	Throughput float64        `yaml:"throughput" in:">0..1" about:"detected electrons per photon at the entrance"`
	Exposure   units.Duration `yaml:"exposure" in:"1 ms..600 s" about:"of one tuning, all co-adds together"`
	Coadds     int            `yaml:"coadds" in:"1..10000"`
	ReadNoise  float64        `yaml:"read_noise" in:"0..1000" about:"electrons rms, one read"`
	FullWell   float64        `yaml:"full_well" in:"0..1e9" about:"electrons of one read beyond which a pixel is saturated; 0: never"`
	Digit      float64        `yaml:"digit" in:"0..1e5" about:"electrons per digital unit; 0: not digitised"`
	FlatField  float64        `yaml:"flat_field" in:"0..0.1" about:"rms of the gain left over by the flat field, each pixel and tuning its own"`
	Lost       float64        `yaml:"lost" in:"0..0.5" about:"share of the frames that are lost"`
	Gaps       []Gap          `yaml:"gaps" about:"spans without frames"`
}

// Scatter is the light that each point of the image spreads far: a share falling with
// the angle t as (1 + (t/core)^2)^(-exponent/2).
type Scatter struct {
	Share    float64        `yaml:"share" in:">0..0.5" about:"of the light"`
	Core     units.SkyAngle `yaml:"core" in:"1 arcsec..3600 arcsec"`
	Exponent float64        `yaml:"exponent" in:">2..10"`
}

// Pointing says how the image moves on the detector.
type Pointing struct {
	Jitter units.SkyAngle `yaml:"jitter" in:"0 arcsec..60 arcsec" about:"rms in each axis, from tuning to tuning"`
	DriftX units.SkyAngle `yaml:"drift_x" in:"-600 arcsec..600 arcsec" about:"along the rows, in an hour"`
	DriftY units.SkyAngle `yaml:"drift_y" in:"-600 arcsec..600 arcsec" about:"along the columns, in an hour"`
}

// Occulter is a round edge that covers a growing part of the aperture inward.
type Occulter struct {
	Radius units.Height   `yaml:"radius" in:">0 Rsun..3 Rsun" about:"where half of the aperture is covered"`
	Width  units.SkyAngle `yaml:"width" in:"0 arcsec..600 arcsec" about:"from all covered to all open"`
}

// A Gap is a span without frames.
type Gap struct {
	From   units.Duration `yaml:"from" in:"0 s..48 h" about:"after the start"`
	Length units.Duration `yaml:"length" in:">0 s..48 h"`
}

// Inversion is the observer's recipe. It may not know the corona.
type Inversion struct {
	Background  bool              `yaml:"background" about:"profiles by least squares with a constant background; needs four tunings or more"`
	Filter      Band              `yaml:"filter"`
	Taper       float64           `yaml:"taper" in:"0..0.5" about:"share of the series under the cosine bell at each end"`
	Box         int               `yaml:"box" in:"5..101" about:"side of the coherence box [pixels], odd"`
	Adaptive    bool              `yaml:"adaptive" about:"a box that its island fills grows, up to three times"`
	Coherence   float64           `yaml:"coherence" in:">0..<1" about:"threshold of the island"`
	Track       int               `yaml:"track" in:"5..201" about:"points along the track, one pixel apart, odd"`
	Estimators  []string          `yaml:"estimators" one:"lag,unsplit,pair" about:"of the phase speed, side by side; the first fills SPEED and B, others SPEED_PAIR and so on"`
	Separation  bool              `yaml:"separation" about:"lag splits outward and inward waves on the track first"`
	KZero       string            `yaml:"k_zero" one:"kept,halved,dropped" about:"what the separation does with the column of zero wavenumber"`
	Padding     int               `yaml:"padding" in:"1..16" about:"zero padding of the track for the separation; 1: none"`
	Temperature units.Temperature `yaml:"temperature" in:"0.64 MK..5 MK" about:"assumed in the ratio density"`
	Mu          float64           `yaml:"mu" in:"0.5..2" about:"rho / (m_p n_e) assumed in the field"`
	Helium      float64           `yaml:"helium" in:"0..0.5" about:"He/H assumed in the ratio density (proton collisions)"`
	Line        Line              `yaml:"line"`
}

// Band is a Gaussian band-pass in frequency.
type Band struct {
	Centre units.Frequency `yaml:"centre" in:"0.1 mHz..100 mHz"`
	Width  units.Frequency `yaml:"width" in:"0.01 mHz..100 mHz"`
	Means  string          `yaml:"means" one:"1/e,sigma" about:"what width is: 1/e half-width or standard deviation of the amplitude filter"`
}

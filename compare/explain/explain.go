// Package explain tells of one pixel of a finished run why its inferred field is what it
// is: what its line of sight holds, how the tracker came to its speed, and which causes
// make up the bias. The command, the viewer and the report share it.
//
// Open prepares a run folder once; At answers for a pixel. The line of sight is looked
// at afresh in the same corona, so its truth is that of truth.fits; the tracker goes its
// way again from series.fits.
package explain

import "offplane/compare/stat"

// Number is null in JSON where it is not finite.
type Number = stat.Number

// A Pixel is the whole answer. Values that do not exist are NaN, null in JSON.
type Pixel struct {
	Schema         int         `json:"schema"` // 1
	Scenario       string      `json:"scenario"`
	ScenarioSHA256 string      `json:"scenario_sha256"`
	Place          Place       `json:"pixel"`
	Valid          bool        `json:"valid"`   // there is an inferred field
	Verdict        string      `json:"verdict"` // a sentence or two
	Causes         []Cause     `json:"causes"`  // of ln(B/B_SKY), the largest first; they add up to it
	Flags          []Flag      `json:"flags"`
	Cautions       []string    `json:"cautions"`
	Truth          Truth       `json:"truth"`
	Inferred       Inferred    `json:"inferred"`
	Ratios         Ratios      `json:"ratios"`
	Identity       Identity    `json:"identity"`
	Sight          Sight       `json:"line_of_sight"`
	Density        Density     `json:"density"`
	Track          Track       `json:"track"`
	Estimators     []Estimator `json:"estimators"` // the first is that of SPEED and B
	Noise          Noise       `json:"noise"`
	Curves         Curves      `json:"curves"`
}

// A Place is where a pixel is.
type Place struct {
	X      int    `json:"x_pixel"` // FITS: from 1
	Y      int    `json:"y_pixel"`
	SolarX Number `json:"solar_x_arcsec"`
	SolarY Number `json:"solar_y_arcsec"`
	Height Number `json:"height_rsun"` // projected distance from the Sun's centre
	PA     Number `json:"position_angle_deg"`
	Class  string `json:"structure"` // of the field line in the plane of the sky
}

// A Cause is one factor of B/B_SKY.
type Cause struct {
	Key    string `json:"key"`
	Name   string `json:"name"`
	Ln     Number `json:"ln_factor"`
	Factor Number `json:"factor"`
	Text   string `json:"text"` // why, with numbers
}

// Keys of the causes.
const (
	SightWaves    = "sight_waves"    // waves off the plane of the sky run at another projected speed
	SightDensity  = "sight_density"  // the ratio mixes densities along the line of sight
	FineStructure = "fine_structure" // strands, unresolved mix: in the ratio, the waves and the kink speed
	Plasma        = "plasma"         // temperature and atomic data that the inversion assumes
	Mu            = "mu"             // mean mass that the inversion assumes
	Outflow       = "outflow"        // carries the waves
	Method        = "method"         // what the estimator makes of the run's waves on one plane; unmeasured: of a plane wave on the track
	TrackPath     = "track_path"     // speed that changes along the track, track beside the field; only where Method is of a plane wave
	SpeedRest     = "speed_rest"     // all that is left of the speed; its name says whether it may be chance
	DensityRest   = "density_rest"   // noise, point spread, filter: the ratio as measured
)

// A Flag is one bit of FLAG that is set.
type Flag struct {
	Name     string `json:"name"`
	About    string `json:"about"`
	Blocking bool   `json:"blocking"` // leaves the pixel without a field
	Detail   string `json:"detail"`   // with the pixel's numbers; may be empty
}

// Truth is the pixel's truth, computed again.
type Truth struct {
	FieldSky      Number `json:"field_sky_G"`
	FieldEmission Number `json:"field_emission_G"`
	FieldWave     Number `json:"field_wave_G"`
	FieldTotal    Number `json:"field_total_sky_G"`
	NeSky         Number `json:"n_e_sky_cm3"`
	NeEmission    Number `json:"n_e_emission_cm3"`
	NeKink        Number `json:"n_e_kink_cm3"`
	SpeedSky      Number `json:"speed_sky_km_s"`
	SpeedWave     Number `json:"speed_wave_km_s"`
	AngleSky      Number `json:"angle_sky_deg"`
	DopplerLocal  Number `json:"doppler_local_km_s"`
}

// Inferred is what the inversion made of it.
type Inferred struct {
	Field      Number `json:"field_G"`
	FieldErr   Number `json:"field_err_G"`
	Ne         Number `json:"n_e_cm3"`
	NeErr      Number `json:"n_e_err_cm3"`
	Ratio      Number `json:"line_ratio"`
	Speed      Number `json:"speed_km_s"`
	SpeedErr   Number `json:"speed_err_km_s"`
	SpeedIn    Number `json:"speed_in_km_s"`
	Angle      Number `json:"angle_deg"`
	AngleErr   Number `json:"angle_err_deg"`
	Coherence  Number `json:"coherence"`
	DopplerRMS Number `json:"doppler_rms_km_s"`
	Width      Number `json:"width_km_s"`
}

// Ratios are inferred over true.
type Ratios struct {
	FieldSky        Number `json:"field_sky"`
	FieldEmission   Number `json:"field_emission"`
	FieldWave       Number `json:"field_wave"`
	FieldTotal      Number `json:"field_total"`
	SpeedSky        Number `json:"speed_sky"`
	SpeedWave       Number `json:"speed_wave"`
	DensitySky      Number `json:"density_sky"`
	DensityEmission Number `json:"density_emission"`
	AngleDiff       Number `json:"angle_diff_deg"` // inferred minus true, -90..90
}

// Identity splits ln(B/B_SKY) as compare.Parts does.
type Identity struct {
	Field    Number `json:"ln_field"`
	Speed    Number `json:"ln_speed"`
	Density  Number `json:"half_ln_density"`
	Mu       Number `json:"half_ln_mu"`
	Kink     Number `json:"minus_half_ln_kink"`
	Residual Number `json:"residual"`
}

// Sight sums up the line of sight.
type Sight struct {
	Depth50     Number      `json:"depth50_rsun"` // of the emission
	Depth90     Number      `json:"depth90_rsun"`
	NearSky     Number      `json:"near_sky"` // share of the emission within 0.1 solar radii of the plane
	Centre      Number      `json:"emission_centre_rsun"`
	WaveDepth50 Number      `json:"wave_depth50_rsun"` // of the wave power
	WaveDepth90 Number      `json:"wave_depth90_rsun"`
	WaveNear    Number      `json:"wave_near_sky"`
	WaveCentre  Number      `json:"wave_centre_rsun"`
	Tilt        Number      `json:"field_tilt_sky_deg"`  // of the field out of the plane, at x = 0
	WaveTilt    Number      `json:"field_tilt_wave_deg"` // mean weighted by wave power
	HighBeta    Number      `json:"high_beta"`           // share of the emission from where beta > 1
	Inward      Number      `json:"inward"`              // share of the wave power that runs inward
	Structures  []Structure `json:"structures"`          // separate peaks of the emission, the brightest first
	Regions     []Region    `json:"regions"`             // by class of the field lines, from the back to the front
}

// A Structure is one peak of the emission against distance.
type Structure struct {
	X        Number `json:"x_rsun"` // of the peak, toward the observer
	From     Number `json:"from_rsun"`
	To       Number `json:"to_rsun"`
	Emission Number `json:"emission_share"`
	Wave     Number `json:"wave_share"`
	Ne       Number `json:"n_e_cm3"`
	Height   Number `json:"height_rsun"` // distance of the peak from the Sun's centre
	Class    string `json:"structure"`
	Main     bool   `json:"main"` // holds the plane of the sky
}

// A Region is a stretch of the line of sight with field lines of one class.
type Region struct {
	Class    string `json:"structure"`
	From     Number `json:"from_rsun"`
	To       Number `json:"to_rsun"`
	Emission Number `json:"emission_share"`
	Wave     Number `json:"wave_share"`
}

// Density tells what the line ratio saw, as electron densities [cm^-3].
type Density struct {
	Line1  Number `json:"n_e_line1_cm3"` // mean weighted by the 1074.7 nm line's emission
	Line2  Number `json:"n_e_line2_cm3"` // by that of the 1079.8 nm line
	Sight  Number `json:"n_e_from_sight_cm3"`
	Smooth Number `json:"n_e_from_smooth_sight_cm3"`
	Local  Number `json:"n_e_from_plane_cm3"`
	Mean   Number `json:"n_e_mean_sky_cm3"` // at x = 0, without strands
}

// Track is the pixel's track.
type Track struct {
	Points      int    `json:"points"`
	Length      Number `json:"length_Mm"`
	Inner       Number `json:"inner_arm_Mm"`
	Outer       Number `json:"outer_arm_Mm"`
	Wavelengths Number `json:"wavelengths"`      // length over the wavelength at the inferred speed and the band's centre
	True        Number `json:"true_wavelengths"` // the same at SPEED_WAVE
	Rise        Number `json:"rise"`             // gain in distance from the Sun over the length
	Off         Number `json:"off_field_deg"`    // mean angle between track and field in the plane of the sky
	Island      int    `json:"island_pixels"`
	Elongation  Number `json:"island_elongation"`
	Filled      bool   `json:"island_fills_window"`
}

// An Estimator is one estimate of the phase speed and what its method does to a plane
// wave on this track, without noise.
type Estimator struct {
	Name     string `json:"name"`
	Speed    Number `json:"speed_km_s"`
	SpeedErr Number `json:"speed_err_km_s"`
	Field    Number `json:"field_G"`
	Plane    Number `json:"plane_wave"`      // measured over true speed: one speed, straight along the track
	Path     Number `json:"plane_wave_path"` // the same with the true speeds and directions along the track
	// METHOD_RATIO of bias.fits: the run's own waves on one plane, without noise, over
	// SPEED_SKY. Of the first estimator alone.
	OnePlane Number `json:"one_plane_run"`
}

// Noise compares the waves with what is not waves.
type Noise struct {
	Doppler      Number `json:"doppler_rms_km_s"`      // of the waves in the band
	InBand       Number `json:"doppler_noise_km_s"`    // of the photons in the band
	SignalNoise  Number `json:"signal_to_noise"`       // ratio of the two
	Reduction    Number `json:"doppler_rms_reduction"` // waves seen over waves at x = 0
	SpeedErr     Number `json:"speed_err"`             // fractions
	SpeedScatter Number `json:"speed_scatter"`         // of one realisation as long as the run, a fraction too
	NeErr        Number `json:"n_e_err"`
	FieldErr     Number `json:"field_err"`
	NoiselessRun bool   `json:"noiseless"`
}

// Curves are for drawing.
type Curves struct {
	Sight        SightCurves  `json:"line_of_sight"`
	Doppler      Doppler      `json:"doppler"`
	Island       []Member     `json:"island"`
	Track        []TrackPoint `json:"track"`
	TimeDistance TimeDistance `json:"time_distance"`
	KOmega       KOmega       `json:"k_omega"`
	Lags         []Lags       `json:"lags"` // an entry an estimator
}

// SightCurves are against distance from the plane of the sky, positive toward the observer.
type SightCurves struct {
	X         []Number `json:"x_rsun"`
	Emission  []Number `json:"emission_per_rsun"`       // share of the 1074.7 nm line
	Emission2 []Number `json:"emission_line2_per_rsun"` // of the 1079.8 nm line
	Wave      []Number `json:"wave_power_per_rsun"`
	Ne        []Number `json:"n_e_cm3"`
	Field     []Number `json:"field_sky_component_G"`
	Tilt      []Number `json:"field_tilt_deg"`
	Speed     []Number `json:"speed_sky_component_km_s"`
	T         []Number `json:"temperature_K"`
}

// Doppler is the band-passed series of the pixel.
type Doppler struct {
	Time  []Number `json:"time_s"`
	Speed []Number `json:"doppler_km_s"`
}

// A Member is a pixel whose coherence with this one was asked for.
type Member struct {
	X         int    `json:"x_pixel"`
	Y         int    `json:"y_pixel"`
	Coherence Number `json:"coherence"`
	Inside    bool   `json:"inside"`
}

// A TrackPoint is one point of the track; distances grow outward.
type TrackPoint struct {
	X        Number `json:"x_pixel"` // FITS
	Y        Number `json:"y_pixel"`
	Distance Number `json:"distance_Mm"`
	Speed    Number `json:"speed_wave_km_s"` // truth SPEED_WAVE there
	Off      Number `json:"off_field_deg"`   // angle between track and field
}

// TimeDistance are maps of the band-passed Doppler shift along the track, a row a point.
type TimeDistance struct {
	Distance []Number   `json:"distance_Mm"`
	Time     []Number   `json:"time_s"`
	Waves    [][]Number `json:"doppler_km_s"`
	Outward  [][]Number `json:"outward_km_s"`
	Inward   [][]Number `json:"inward_km_s"`
}

// KOmega is the power on the track, a row a wavenumber; outward waves have positive ones.
type KOmega struct {
	Wavenumber []Number   `json:"wavenumber_rad_Mm"`
	Frequency  []Number   `json:"frequency_mHz"`
	Power      [][]Number `json:"power_km2_s2"`
}

// Lags are the lags along the track and the line through them; of the pair fit instead
// the share of the power that it explains at each speed.
type Lags struct {
	Name      string   `json:"name"`
	Distance  []Number `json:"distance_Mm"`
	Lag       []Number `json:"lag_s"`
	Weight    []Number `json:"weight"`
	Slope     Number   `json:"slope_s_Mm"`
	Intercept Number   `json:"intercept_s"`
	Speeds    []Number `json:"speeds_km_s"`
	Explained []Number `json:"explained"`
}

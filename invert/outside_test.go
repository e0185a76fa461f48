//go:build outside

package invert

import (
	"context"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"offplane/synth/fits/fitstest"
	"offplane/synth/obs"
)

// numpyWaves writes an observer's own files: waves of 400 km/s away from the Sun in cells
// of 7 Mm across, seen at the west limb, the line and the filter Gaussian. Argument 1 is
// the folder, argument 2 the roll [deg].
const numpyWaves = fitstest.Strict + `
folder, roll = sys.argv[1], float(sys.argv[2])
nx, ny, nt, dt, pixel = 34, 32, 180, 30.0, 4.35
rng = np.random.default_rng(11)
c, s = np.cos(np.radians(roll)), np.sin(np.radians(roll))
# Pixel of the disc centre: the patch lies around 1.2 solar radii, west.
far = 1.2 * 959.63 / pixel
cx, cy = (nx + 1) / 2 - c * far, (ny + 1) / 2 + s * far
dx, dy = np.meshgrid(np.arange(1, nx + 1) - cx, np.arange(1, ny + 1) - cy)
west, north = pixel * (c * dx - s * dy), pixel * (s * dx + c * dy)   # arcsec
mm = 696.34 / 959.63
f = np.fft.rfftfreq(nt, dt)
a = np.where((f > 0.3e-3) & (f < 9e-3), np.maximum(f, 1e-9) ** -0.75, 0)
cells = {}
def cell(i):
    if i not in cells: cells[i] = a * (rng.normal(size=f.size) + 1j * rng.normal(size=f.size))
    return cells[i]
v = np.zeros((nt, ny, nx))
for j in range(ny):
    for i in range(nx):
        across, along = north[j, i] * mm / 7, west[j, i] * mm * 1e3
        k = int(np.floor(across)); u = (across - k) * np.pi / 2
        z = np.cos(u) * cell(k) + np.sin(u) * cell(k + 1)
        v[:, j, i] = np.fft.irfft(z * np.exp(-2j * np.pi * f * along / 400), nt)
v *= 0.4 / v.std()
light, rest = 299792.458, (1074.7, 1079.8)
def profile(line, offset, v, energy):
    w, wf = 35.0, light * 0.13 / (2 * np.sqrt(np.log(2))) / rest[line]
    x = light * offset / rest[line]
    return energy * wf / np.sqrt(w * w + wf * wf) * np.exp(-(x - v) ** 2 / (w * w + wf * wf))
d = np.array([-0.12, 0, 0.12])
one = np.stack([profile(0, x, v, 10.0) for x in d], axis=1)                    # time, wavelength, y, x
two = np.stack([profile(1, x, np.zeros((ny, nx)), 4.0) for x in d])            # wavelength, y, x
def header(extra=()):
    h = fits.Header()
    for i, (kind, unit, step, at, ref) in enumerate([("HPLN-TAN", "arcsec", pixel, 0.0, cx), ("HPLT-TAN", "arcsec", pixel, 0.0, cy), *extra], 1):
        h[f"CTYPE{i}"], h[f"CUNIT{i}"], h[f"CDELT{i}"], h[f"CRVAL{i}"], h[f"CRPIX{i}"] = kind, unit, step, at, ref
    h["PC1_1"], h["PC1_2"], h["PC2_1"], h["PC2_2"] = c, -s, s, c
    h["DSUN_OBS"], h["RSUN_REF"] = 1.495978707e11, 6.957e8
    h["DATE-OBS"] = "2025-03-20T18:00:00"
    return h
def write(name, data, h): fits.PrimaryHDU(data, h).writeto(folder + "/" + name, overwrite=True)
time = ("UTC", "s", dt, 0.0, 1.0)
def wave(line): return ("WAVE", "nm", 0.12, rest[line], 2.0)
write("tunings.fits", one.astype("f4"), header([wave(0), time]))
write("second.fits", two.astype("f4"), header([wave(1)]))
h = header([time]); h["BUNIT"] = "m/s"
write("doppler.fits", (1e3 * v).astype("f4"), h)
h = header(); h["BUNIT"] = "%"
write("ratio.fits", np.full((ny, nx), 40.0, "f4"), h)
h = header(); h["BUNIT"] = "m-3"
write("density.fits", np.full((ny, nx), 1e14), h)
# Scaled 16-bit integers in metres and minutes, time before wavelength.
h = header([("TIME", "min", dt / 60, 0.0, 1.0), ("WAVE", "m", 0.12e-9, rest[0] * 1e-9, 2.0)])
hdu = fits.PrimaryHDU(np.moveaxis(one, 0, 1).astype("f8"), h)
hdu.scale("int16", bscale=one.max() / 60000, bzero=one.max() / 2)
hdu.writeto(folder + "/scaled.fits", overwrite=True)
assert fits.getheader(folder + "/scaled.fits")["BITPIX"] == 16 and fits.getheader(folder + "/scaled.fits")["BZERO"] != 0
# What does not work.
write("swapped.fits", np.moveaxis(v, 1, 2).astype("f4"), header([time]))
h = fits.getheader(folder + "/swapped.fits"); h["CTYPE1"], h["CTYPE2"] = "HPLT-TAN", "HPLN-TAN"
write("swapped.fits", np.swapaxes(v, 1, 2).astype("f4"), h)
write("transposed.fits", np.moveaxis(v, 0, 2).astype("f4"), header())
h = header([time]); write("unit.fits", v.astype("f4"), h)
h = header([wave(0), time]); del h["CDELT3"]
write("nowave.fits", one.astype("f4"), h)
h = header([("WAVE", "nm", 0.12, 1062.0, 2.0), time])
write("elsewhere.fits", one.astype("f4"), h)
write("one.fits", one[:1].astype("f4"), header([wave(0), time]))
w = one.astype("f4").copy(); w[5:60] = np.nan
write("nan.fits", w, header([wave(0), time]))
w = one.astype("f4").copy(); w[7] = np.nan; w[90:94] = np.nan
write("gaps.fits", w, header([wave(0), time]))
t = np.arange(nt) * dt; keep = (t < 2000) | (t > 2400)
table = fits.BinTableHDU.from_columns([fits.Column("time", "D", unit="s", array=t[keep])], name="TIMES")
fits.HDUList([fits.PrimaryHDU(one[keep].astype("f4"), header([wave(0), ("UTC", "s", dt, 0.0, 1.0)])), table]).writeto(folder + "/uneven.fits", overwrite=True)
keep = (t < 2000) | (t > 4000)
table = fits.BinTableHDU.from_columns([fits.Column("time", "D", unit="s", array=t[keep])], name="TIMES")
fits.HDUList([fits.PrimaryHDU(one[keep].astype("f4"), header([wave(0), ("UTC", "s", dt, 0.0, 1.0)])), table]).writeto(folder + "/hole.fits", overwrite=True)
`

// An observer's own files, written by numpy, give the speed and density that went in:
// four-dimensional tunings with a second-line file, a Doppler cube in m/s with a ratio in
// per cent or a density in m^-3, scaled 16-bit integers with axes in other units and
// another order, a rotated PC matrix, gaps.
func TestUserDataOutside(t *testing.T) {
	const rolled = "25"
	dir := map[string]string{"0": t.TempDir(), rolled: t.TempDir()}
	for roll, d := range dir {
		fitstest.Python(t, numpyWaves, d, roll)
	}
	opt := Default()
	opt.Box, opt.Track, opt.Estimators = 15, 21, []string{Pair}
	e := powerLaw{1.4, 1.8} // a ratio of 0.4 is 1e8 cm^-3
	base := obs.UserData{Rest: [2]float64{rest1, rest2}, FilterFWHM: 0.13}
	for name, c := range map[string]struct {
		roll string
		user obs.UserData
		flag int32 // on every pixel
		tol  float64
	}{
		"tunings":  {"0", obs.UserData{First: "tunings.fits", Second: "second.fits"}, 0, 1e-4},
		"rotated":  {rolled, obs.UserData{First: "tunings.fits", Second: "second.fits"}, 0, 1e-4},
		"ratio":    {"0", obs.UserData{First: "doppler.fits", Ratio: "ratio.fits"}, 0, 1e-4},
		"density":  {rolled, obs.UserData{First: "doppler.fits", Density: "density.fits"}, 0, 1e-4},
		"integers": {"0", obs.UserData{First: "scaled.fits", Second: "second.fits"}, 0, 5e-3},
		"named":    {"0", obs.UserData{First: "tunings.fits[0]", Second: "second.fits", Axes: []string{"x", "y", "wavelength", "time"}, Cadence: 30, Wavelengths: [2][]float64{{1074.58, 1074.7, 1074.82}}}, 0, 1e-4},
		"gaps":     {"0", obs.UserData{First: "gaps.fits", Second: "second.fits"}, FlagRepaired, 1e-4},
		"uneven":   {"0", obs.UserData{First: "uneven.fits", Second: "second.fits"}, FlagRepaired, 1e-4},
	} {
		u := c.user
		u.Rest, u.FilterFWHM = base.Rest, base.FilterFWHM
		for _, p := range []*string{&u.First, &u.Second, &u.Ratio, &u.Density} {
			if *p != "" {
				*p = filepath.Join(dir[c.roll], *p)
			}
		}
		o, err := obs.ReadUserData(u)
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		r, err := Invert(context.Background(), o, e, opt, 0, nil)
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		checkFlags(t, r)
		v, n := median(values(r.Maps.Get("SPEED"))), median(values(r.Maps.Get("NE")))
		_, angle := angleErrors(r.Maps.Get("ANGLE"), 90)
		valid := 1 - flagged(r.Maps.Get("FLAG"), Blocking)
		t.Logf("%s: %.1f km/s, %.4g cm^-3, angle off by %.2f deg, %.2f valid", name, v, n, angle, valid)
		if math.Abs(v/400-1) > 0.02 || math.Abs(n/1e8-1) > c.tol || angle > 1.5 || valid < 0.95 {
			t.Errorf("%s: %.1f km/s, %.4g cm^-3, angle off by %.2f deg, %.2f valid", name, v, n, angle, valid)
		}
		if f := r.Maps.Get("FLAG"); c.flag != 0 && flagged(f, c.flag) != 1 {
			t.Errorf("%s: %.2f of the pixels have flag %b", name, flagged(f, c.flag), c.flag)
		}
	}
	for file, want := range map[string]string{
		"swapped.fits":    "axes are y, x, time: x and y are swapped; a numpy array is written with its axes in reverse",
		"transposed.fits": `axis 3 of length 32 has CTYPE3 ""`,
		"unit.fits":       `BUNIT is "": want km/s`,
		"nowave.fits":     "CDELT3 is missing: the wavelengths of the tunings are not known",
		"elsewhere.fits":  "tunings from 1061.880 to 1062.120 nm in vacuum do not enclose line 1 at 1074.700 nm",
		"one.fits":        "has one frame along its time axis 4",
		"nan.fits":        "55 of 180 frames hold no value, among them 6, 7, 8, 9, 10",
		"ratio.fits":      "has no time axis: axes are x, y",
		"missing.fits":    "missing.fits",
	} {
		u := base
		u.First = filepath.Join(dir["0"], file)
		if _, err := obs.ReadUserData(u); err == nil || !strings.Contains(err.Error(), want) || !strings.Contains(err.Error(), file) {
			t.Errorf("%s: %v, want %q", file, err, want)
		}
	}
	u := base
	u.First = filepath.Join(dir["0"], "hole.fits")
	o, err := obs.ReadUserData(u)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Invert(context.Background(), o, e, opt, 0, nil); err == nil || !strings.Contains(err.Error(), "have no frame within the cadence of 30 s") {
		t.Errorf("a hole of 2000 s in 5400 s: %v", err)
	}
	u.First, u.Ratio = filepath.Join(dir["0"], "doppler.fits"), filepath.Join(dir["25"], "ratio.fits")
	if _, err := obs.ReadUserData(u); err == nil || !strings.Contains(err.Error(), "the ratio map is not on the grid of") {
		t.Errorf("a map on another grid: %v", err)
	}
	if own, err := obs.IsObservation(u.First); own || err != nil {
		t.Errorf("an observation of ours: %v, %v", own, err)
	}
	if err := os.Remove(u.First); err != nil {
		t.Fatal(err)
	}
}

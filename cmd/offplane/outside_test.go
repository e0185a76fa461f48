//go:build outside

package main

import (
	"bytes"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"offplane/compare/table"
	"offplane/synth/fits/fitstest"
)

// Every file of a run before outside judges: fitsverify finds nothing, the solar map
// package loads every image of truth, inferred and bias without a warning, astropy
// reads cubes, tables and the ECSV with units, and the resolved scenario comes back
// byte for byte.
func TestFilesOutside(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "out")
	var stdout, stderr bytes.Buffer
	args := []string{"run", "quick", "--frames", "--quiet", "-o", dir, "--set", "image.from=268 deg", "--set", "image.to=272 deg", "--set", "camera.duration=40 min"}
	if code := Main(args, &stdout, &stderr); code != 0 {
		t.Fatalf("exit %d: %s", code, stderr.String())
	}
	fits, err := filepath.Glob(filepath.Join(dir, "*.fits"))
	if err != nil || len(fits) != 5 {
		t.Fatalf("FITS files: %v, %v", fits, err)
	}
	fitstest.Verify(t, fits...)
	fitstest.Python(t, fitstest.Strict+`
import hashlib, json
import astropy.units as u
from astropy.table import QTable
d = sys.argv[1] + "/"
counts = {"truth": 15, "inferred": 18, "bias": 5}
for name, n in counts.items():
    maps = sunpy.map.Map(d + name + ".fits")
    assert len(maps) == n, (name, len(maps))
    for m in maps:
        m.pixel_to_world(0 * u.pix, 0 * u.pix)
with fits.open(d + "truth.fits", checksum=True) as f:
    assert f["B_SKY"].header["BUNIT"] == "G" and f["NE_SKY"].header["BUNIT"] == "cm-3"
    scenario = f["SCENARIO"].data["yaml"][0].tobytes()
s = json.load(open(d + "summary.json"))
assert s["scenario_text"].encode() == scenario
assert hashlib.sha256(scenario).hexdigest() == s["scenario_sha256"]
with fits.open(d + "bias.fits", checksum=True) as f:
    assert f["SCENARIO"].data["yaml"][0].tobytes() == scenario
    assert "BUNIT" not in f["B_RATIO"].header and f["ANGLE_DIFF"].header["BUNIT"] == "deg"
    assert abs(float(np.nanmedian(f["B_RATIO"].data)) - s["ratios"]["field"]["sky"]["median"]) < 1e-6
with fits.open(d + "observation.fits", checksum=True) as f:
    names = [h.name for h in f]
    assert names[1:] == ["LINE1_MEAN", "LINE2_MEAN", "TUNINGS", "EXPOSURES", "LINE1", "LINE2"] or set(names[1:]) == {"LINE1_MEAN", "LINE2_MEAN", "TUNINGS", "EXPOSURES", "LINE1", "LINE2"}, names
    assert f["LINE1"].data.ndim == 4
    for h in f[1:]:
        if h.is_image: WCS(h.header)
    t = f["EXPOSURES"].data
    assert len(t) == f["LINE1"].data.shape[0] + f["LINE2"].data.shape[0]
    for h in f:
        for c in h.header.cards:
            assert not any(w in str(c).lower() for w in ("corona", "gibson", "dipole", "seed")), c
t = QTable.read(d + "bias.ecsv")
assert len(t) > 0 and t.colnames
with fits.open(d + "series.fits", checksum=True) as f:
    assert len(f[1].data) > 0
`, dir)
}

// Frames that somebody wrote with numpy: Doppler shifts in m/s of waves that run outward
// at 400 km/s beside the west limb, and a map of the line ratio in a file of its own.
func TestOwnFramesOutside(t *testing.T) {
	dir := t.TempDir()
	fitstest.Python(t, fitstest.Strict+`
d = sys.argv[1] + "/"
rng = np.random.default_rng(1)
nt, ny, nx, dt, pixel = 240, 40, 60, 30.0, 4.35
x = np.arange(nx) * pixel * 725.27
tt = np.arange(nt) * dt
f = np.arange(1.5e-3, 6e-3, 1 / (nt * dt))
v = np.zeros((nt, ny, nx))
cells = rng.normal(size=(ny // 2 + 2, 2, len(f)))
for j in range(ny):
    u = (j % 2) / 2
    a = np.cos(u * np.pi / 2) * cells[j // 2] + np.sin(u * np.pi / 2) * cells[j // 2 + 1]
    for k, w in enumerate(2 * np.pi * f):
        p = w * (tt[:, None] - x / 400)
        v[:, j] += a[0, k] * np.cos(p) + a[1, k] * np.sin(p)
v *= 500 / v.std()
v += 50 * rng.normal(size=v.shape)
h = fits.Header()
axes = [("HPLN-TAN", "arcsec", pixel, 1010.0, 1), ("HPLT-TAN", "arcsec", pixel, 0.0, (ny + 1) / 2), ("UTC", "s", dt, 0.0, 1)]
for i, (kind, unit, step, value, ref) in enumerate(axes, 1):
    h[f"CTYPE{i}"], h[f"CUNIT{i}"], h[f"CDELT{i}"], h[f"CRVAL{i}"], h[f"CRPIX{i}"] = kind, unit, step, value, ref
h["DSUN_OBS"], h["RSUN_REF"], h["DATE-OBS"], h["HGLN_OBS"], h["HGLT_OBS"], h["BUNIT"] = 1.495978707e11, 6.957e8, "2025-03-20T18:00:00", 0.0, 0.0, "m/s"
fits.PrimaryHDU(v.astype("f4"), h).writeto(d + "mine.fits")
del h["CTYPE3"], h["CUNIT3"], h["CDELT3"], h["CRVAL3"], h["CRPIX3"], h["BUNIT"]
fits.PrimaryHDU(np.full((ny, nx), 0.38, "f4"), h).writeto(d + "ratio.fits")
`, dir)
	var stdout, stderr bytes.Buffer
	out := filepath.Join(dir, "maps")
	if code := Main([]string{"invert", dir + "/mine.fits", "--ratio", dir + "/ratio.fits", "--estimator", "pair,lag", "--quiet", "-o", out}, &stdout, &stderr); code != 0 {
		t.Fatalf("exit %d: %s", code, stderr.String())
	}
	fitstest.Verify(t, filepath.Join(out, "inferred.fits"), filepath.Join(out, "series.fits"))
	fitstest.Python(t, fitstest.Strict+`
with fits.open(sys.argv[1] + "/inferred.fits", checksum=True) as f:
    v = float(np.nanmedian(f["SPEED"].data))
    assert abs(v / 400 - 1) < 0.03, v
    assert np.isfinite(f["B"].data).mean() > 0.5
    assert "SPEED_LAG" in f
`, out)
	stdout.Reset()
	stderr.Reset()
	if code := Main([]string{"invert", dir + "/mine.fits", "--ratio", dir + "/none.fits", "-o", out + "2"}, &stdout, &stderr); code != 2 {
		t.Fatalf("exit %d: %s", code, stderr.String())
	}
}

// The Python of the README writes files that invert and scenario check accept.
func TestReadmePythonOutside(t *testing.T) {
	text, err := os.ReadFile("../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	blocks := strings.Split(string(text), "```python\n")[1:]
	if len(blocks) != 3 {
		t.Fatalf("%d blocks of Python", len(blocks))
	}
	dir := t.TempDir()
	if code, _, stderr := offplane("table", "show", "--ecsv", filepath.Join(dir, "sky.ecsv")); code != 0 {
		t.Fatal(stderr)
	}
	for _, b := range blocks {
		b, _, _ = strings.Cut(b, "```")
		fitstest.Python(t, "import os, sys\nos.chdir(sys.argv[1])\n"+b, dir)
	}
	scenario := filepath.Join(dir, "mine.yaml")
	if err := os.WriteFile(scenario, []byte("about: a corona from numpy\ncorona:\n  grid:\n    file: corona.fits\nimage:\n  from: 268 deg\n  to: 272 deg\n"), 0o666); err != nil {
		t.Fatal(err)
	}
	for _, args := range [][]string{
		{"scenario", "check", scenario},
		{"invert", filepath.Join(dir, "mine.fits"), "--filter", "0.13", "--quiet", "-o", filepath.Join(dir, "maps")},
	} {
		var stdout, stderr bytes.Buffer
		if code := Main(args, &stdout, &stderr); code != 0 {
			t.Errorf("%v: exit %d: %s", args, code, stderr.String())
		}
	}
}

// The files of an ensemble before outside judges: fitsverify finds nothing in a member,
// astropy reads its tables and the index with units, and they agree.
func TestEnsembleOutside(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "out")
	var stdout, stderr bytes.Buffer
	if code := Main([]string{"ensemble", "run", "small", "--quiet", "-o", dir}, &stdout, &stderr); code != 0 {
		t.Fatalf("exit %d: %s", code, stderr.String())
	}
	members, err := filepath.Glob(filepath.Join(dir, "members", "*", "member.fits"))
	if err != nil || len(members) < 2 {
		t.Fatalf("members: %v, %v", members, err)
	}
	fitstest.Verify(t, members...)
	fitstest.Python(t, fitstest.Strict+`
import glob
import astropy.units as u
from astropy.table import QTable
d = sys.argv[1]
index = QTable.read(d + "/members.ecsv")
assert index["corona.belt.tilt"].unit == u.deg
for row, path in zip(index, sorted(glob.glob(d + "/members/*/member.fits"))):
    with fits.open(path, checksum=True) as f:
        assert f[0].header["MEMBER"] == row["member"]
        assert f["HEIGHTS"].data["valid"].sum() == row["valid"] and f["HEIGHTS"].data["pixels"].sum() == row["pixels"]
        value = dict(zip(f["PARAMETERS"].data["path"], f["PARAMETERS"].data["value"]))["corona.belt.tilt"]
        assert u.Quantity(value) == row["corona.belt.tilt"], value
    t = QTable.read(path, hdu="PIXELS")
    assert t["B"].unit == u.G and t["NE_SKY"].unit == u.cm**-3 and t["SPEED"].unit == u.km / u.s and t["R"].unit == u.R_sun
    assert np.isfinite(t["B"].value).sum() == row["valid"]
`, dir)
}

// The Python of the README gives the factors of table apply, with the same domain, and the
// corrected maps are clean.
func TestTableOutside(t *testing.T) {
	text, err := os.ReadFile("../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	_, block, _ := strings.Cut(string(text), "def factor(")
	block, _, _ = strings.Cut("import numpy as np\nfrom astropy.table import QTable\nfrom scipy.interpolate import RegularGridInterpolator\ndef factor("+block, "print(")
	dir := t.TempDir()
	field, density := writePublished(t, dir, true)
	out := filepath.Join(dir, "out")
	for _, args := range [][]string{
		{"table", "show", "sky", "--ecsv", filepath.Join(dir, "sky.ecsv")},
		{"table", "apply", field, "--density", density, "--recipe", "as-table", "--recipe", "pixel=4.35", "-o", out},
	} {
		if code, _, stderr := offplane(args...); code != 0 {
			t.Fatalf("exit %d: %s", code, stderr)
		}
	}
	tab, err := table.Open("sky")
	if err != nil {
		t.Fatal(err)
	}
	if err := tab.WriteFITS(filepath.Join(dir, "sky.fits")); err != nil {
		t.Fatal(err)
	}
	fitstest.Verify(t, filepath.Join(dir, "sky.fits"), filepath.Join(out, "corrected.fits"))
	fitstest.Python(t, fitstest.Strict+block+`
import astropy.units as u
d = sys.argv[1]
a, b = QTable.read(d + "/sky.ecsv"), QTable.read(d + "/sky.fits", hdu="TABLE")
b.convert_bytestring_to_unicode()
assert a["height"].unit == b["height"].unit == u.solRad and a["field"].unit == b["field"].unit == u.G and a["density"].unit == b["density"].unit == u.cm**-3
assert a.colnames == b.colnames and len(a) == len(b)
for c in a.colnames:
    x, y = np.asarray(a[c]), np.asarray(b[c])
    assert np.array_equal(x, y, equal_nan=True) if x.dtype.kind == "f" else x.dtype.kind == "i" and (x == y).all() or (np.char.rstrip(x.astype(str)) == np.char.rstrip(y.astype(str))).all(), c
with fits.open(d + "/out/corrected.fits", checksum=True) as f, fits.open(d + "/field.fits") as g, fits.open(d + "/density.fits") as h:
    w, wn = WCS(g[1].header), WCS(h[1].header)
    iy, ix = np.mgrid[:30, :40]
    lon, lat = w.pixel_to_world_values(ix, iy)
    lon, lat = np.radians(lon), np.radians(lat)
    height = np.tan(np.arccos(np.cos(lat) * np.cos(lon))) * 1.495978707e11 / 6.957e8
    jx, jy = np.rint(wn.world_to_pixel_values(np.degrees(lon), np.degrees(lat))).astype(int)
    have = dict(height=height, field=np.float64(g[1].data) * 1e4, density=np.float64(h[1].data)[jy, jx] * 1e-6)
    got, want = f["FACTOR"].data, factor(d + "/sky.ecsv", "field", **have)
    assert np.isfinite(got).sum() > 300, np.isfinite(got).sum()
    assert (np.isfinite(got) == np.isfinite(want)).all()
    assert (np.isfinite(got) == (f["FLAG"].data & ~16 == 0)).all()
    assert np.nanmax(np.abs(np.log(got / want))) < 1e-6, np.nanmax(np.abs(np.log(got / want)))
    low = factor(d + "/sky.ecsv", "field", "ln_low68", **have)
    assert np.nanmax(np.abs(np.log(f["B_LOW68"].data / g[1].data / low))) < 1e-6
    assert f["B"].header["BUNIT"] == "T"
for m in sunpy.map.Map(d + "/out/corrected.fits"):
    m.pixel_to_world(0 * u.pix, 0 * u.pix)
`, dir)
}

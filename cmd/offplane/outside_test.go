//go:build outside

package main

import (
	"bytes"
	"path/filepath"
	"testing"

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
counts = {"truth": 15, "inferred": 16, "bias": 4}
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

//go:build outside

package obs

import (
	"encoding/json"
	"math"
	"path/filepath"
	"testing"

	"offplane/synth/fits"
	"offplane/synth/fits/fitstest"
)

// Map files load whole in the solar map package without a warning, integer
// images and rolled grids too, and its coordinates are those of Grid.
func TestMapsOutside(t *testing.T) {
	dir := t.TempDir()
	rolled := testGrid()
	plain := testGrid()
	plain.Roll, plain.RestWavelength, plain.Start = 0, 0, plain.Start.Truncate(1e9)
	for name, g := range map[string]Grid{"rolled.fits": rolled, "plain.fits": plain} {
		path := filepath.Join(dir, name)
		table := fits.Table{Name: "NUMBERS", Columns: []fits.Column{{Name: "a", Unit: "km/s", Data: []float64{1}}}}
		if err := WriteMaps(path, &g, testMaps(&g), fits.Header{{Key: "ORIGIN", Value: "test"}}, table); err != nil {
			t.Fatal(err)
		}
		fitstest.Verify(t, path)
		out := fitstest.Python(t, fitstest.Strict+`
import json, logging
import astropy.units as u
from sunpy import log
class Refuse(logging.Handler):
    def emit(self, r): raise SystemExit("log: " + r.getMessage())
log.addHandler(Refuse(level=logging.INFO))
with fits.open(sys.argv[1], checksum=True) as f:
    for h in f:
        h.data
        if h.is_image and h.header["NAXIS"]: WCS(h.header)
maps = sunpy.map.Map(sys.argv[1])
assert len(maps) == 4 and maps[2].data.dtype.kind == "i" and np.isnan(maps[0].data[0, 5])
assert maps[0].unit == u.G and maps[1].unit is None
m = maps[0]
assert m.latex_name.startswith("synthetic")
c = m.pixel_to_world([0, 11] * u.pix, [0, 6] * u.pix)
print(json.dumps({"tx": c.Tx.to_value("arcsec").tolist(), "ty": c.Ty.to_value("arcsec").tolist(), "date": m.date.isot,
  "dsun": m.dsun.to_value("m"), "rsun": m.rsun_obs.to_value("arcsec"), "lat": m.heliographic_latitude.to_value("deg"), "lon": m.heliographic_longitude.to_value("deg"),
  "exposure": m.exposure_time.to_value("s"), "wavelength": None if m.wavelength is None else m.wavelength.to_value("nm")}))
`, path)
		var got struct {
			Tx, Ty                         [2]float64
			Date                           string
			Dsun, Rsun, Lat, Lon, Exposure float64
			Wavelength                     *float64
		}
		if err := json.Unmarshal([]byte(out), &got); err != nil {
			t.Fatalf("%v: %s", err, out)
		}
		for i, p := range [][2]int{{0, 0}, {11, 6}} {
			tx, ty := g.Helioprojective(p[0], p[1])
			// 1e-6 arcsec: rounding of degrees near 180 in double precision, times 3600.
			if math.Abs(tx-got.Tx[i]) > 1e-6 || math.Abs(ty-got.Ty[i]) > 1e-6 {
				t.Errorf("%s: pixel %v at (%v, %v) arcsec, outside (%v, %v)", name, p, tx, ty, got.Tx[i], got.Ty[i])
			}
		}
		dsun := g.Distance * 6.957e8
		if got.Date != g.Start.Format("2006-01-02T15:04:05.000") || got.Dsun != dsun || got.Lat != g.Latitude || got.Lon != g.Longitude || got.Exposure != g.Exposure ||
			math.Abs(got.Rsun-math.Asin(6.957e8/dsun)*180/math.Pi*3600) > 1e-9 || (got.Wavelength == nil) != (g.RestWavelength == 0) {
			t.Errorf("%s: %s", name, out)
		}
	}
}

// Cubes pass the judges, and their axes are where the tables say.
func TestObservationOutside(t *testing.T) {
	dir := t.TempDir()
	o := testObservation(20, 4)
	path := filepath.Join(dir, "observation.fits")
	if err := WriteObservation(path, o, fits.Header{{Key: "ORIGIN", Value: "test"}}, true); err != nil {
		t.Fatal(err)
	}
	series := filepath.Join(dir, "series.fits")
	c := NewCube(len(o.Pixels), 1, 20)
	if err := WriteSeries(series, &o.Grid, o.Pixels, c, nil, fits.Header{{Key: "CADENCE", Value: 30.0}}); err != nil {
		t.Fatal(err)
	}
	fitstest.Verify(t, path, series)
	fitstest.Python(t, fitstest.Strict+`
from astropy.table import QTable
import astropy.units as u
with fits.open(sys.argv[1], checksum=True) as f:
    tun, exp = QTable.read(f["TUNINGS"]), QTable.read(f["EXPOSURES"])
    for line in (1, 2):
        h = f[f"LINE{line}"]
        w = WCS(h.header)
        n = [h.header[f"NAXIS{i}"] for i in (1, 2, 3, 4)]
        assert h.data.shape == (n[3], n[2], 7, 12)
        lam, t = tun["wavelength_nm"][tun["line"] == line], exp["time_s"][exp["line"] == line]
        for k in range(n[2]):
            for j in range(n[3]):
                v = w.wcs_pix2world([[0, 0, k, j]], 0)[0]
                assert abs(v[2] - lam[k].to_value("m")) < 1e-17 and abs(v[3] - t[j].to_value("s")) < 1e-9, (v, lam[k], t[j])
        when = w.pixel_to_world(0, 0, 0, 1)[-1]
        assert abs((when.to_datetime() - w.pixel_to_world(0, 0, 0, 0)[-1].to_datetime()).total_seconds() - 30.1) < 1e-4
        field = np.isfinite(f[f"LINE{line}_MEAN"].data).all(axis=0)
        assert field.sum() == int(sys.argv[3])
        d = h.data.astype("f8")
        assert np.allclose(d[:, :, field].mean(axis=0), f[f"LINE{line}_MEAN"].data[:, field], rtol=1e-5, atol=1e-9)
        assert np.isnan(d[:, :, ~field]).all()
        WCS(f[f"LINE{line}_MEAN"].header)
s = QTable.read(sys.argv[2], "SERIES")
assert s["series"].unit == u.km / u.s and s["series"].shape == (int(sys.argv[3]), 20) and s["tx"].unit == u.arcsec
`, path, series, "49")
}

//go:build outside

package fits

import (
	"path/filepath"
	"testing"

	"offplane/synth/fits/fitstest"
)

func TestOutside(t *testing.T) {
	t.Setenv("SOURCE_DATE_EPOCH", "1735689600")
	path := filepath.Join(t.TempDir(), "s.fits")
	sample(t, path)
	fitstest.Verify(t, path)
	fitstest.Python(t, fitstest.Strict+`
with fits.open(sys.argv[1], checksum=True) as f:
    for h in f:
        h.data
        for c in h.header.cards:
            c.verify("exception")
    np.testing.assert_array_equal(f["VEL"].data, np.array([[1, np.nan, -3], [np.inf, 1e-40, 0]], ">f4"))
    assert f["VEL"].header["X"] == 0.1 and f["VEL"].header["Y"] == -1.2345678901234567e-300
    assert len(f["VEL"].header["LONGTEXT"].rstrip()) == 134 and f["VEL"].header["QUOTED"] == "it's 'so'"
    assert f[0].header["LONGTEXT"].count("it's ") == 1 and f[0].header["DATE"] == "2025-01-01T00:00:00"
    assert f["FLAG"].data.ravel().tolist() == [0, -1, 2**31-1, -2**31]
    assert f["CUBE"].data.shape == (4, 3, 2) and f["CUBE"].data[2, 1, 0] == 2.25
    t = f["TAB"].data
    assert t["k"].tolist() == [-2**63, 2**63-1] and list(t["a"]) == ["ab", "abcde"] and t["v"][0].tolist() == [1, 2, 3]
    assert f["TAB"].columns["d"].unit == "s" and np.isnan(t["d"][1])
    assert f["BLOB"].data["yaml"][0].tobytes() == "a: 1\nµ: 2\0".encode() + b"\xff\n"
    assert len(f["EMPTY"].data) == 0
`, path)
}

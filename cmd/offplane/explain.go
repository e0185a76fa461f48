package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"text/tabwriter"
	"unicode/utf8"

	"github.com/spf13/cobra"

	"offplane/compare/explain"
	"offplane/compare/report"
	"offplane/scenarios/units"
)

func (p *program) explainCommand() *cobra.Command {
	var at, polar string
	var figure figureFile
	var json bool
	var workers int
	cmd := &cobra.Command{
		Use:   "explain DIR --at X,Y | --polar PA,R",
		Short: "Tell of one pixel of a run why its field is what it is",
		Long: `explain takes the folder that run left and a pixel, and tells why its inferred field
differs from the true one: the causes, the largest first, whose factors multiply to
B/B_SKY; where along the line of sight the emission and the wave power come from; what
the line ratio saw; the track, what the estimator makes of a plane wave on it, the noise
and the flags. A pixel without a field is explained by its flags.

The line of sight is computed again in the same corona, so its truth is that of
truth.fits; the tracker goes its way again from series.fits.`,
		Example: `  offplane explain out --at 1010,-25
  offplane explain out --polar 270,1.1 --figure pixel.png
  offplane explain out --at 1010,-25 --json`,
		Args: argument("the folder of a run"),
	}
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		if at != "" && polar != "" {
			return misusef("offplane explain takes one pixel, and both --at and --polar were given: leave one out")
		}
		if at == "" && polar == "" {
			return misusef("offplane explain needs a pixel: either --at X,Y [arcsec] or --polar PA,R [deg, solar radii]")
		}
		flag, value, want := "at", at, "X,Y in arcsec, such as 1010,-25"
		if polar != "" {
			flag, value, want = "polar", polar, "PA,R in degrees and solar radii, such as 270,1.1"
		}
		n, err := numbers(flag, value)
		if err != nil || len(n) != 2 || math.IsNaN(n[0]+n[1]) || math.IsInf(n[0]+n[1], 0) {
			return misusef("--%s %s: write %s", flag, value, want)
		}
		if polar != "" && n[1] <= 0 {
			return misusef("--polar %s: the distance from the Sun's centre is %g solar radii and must be greater than 0", value, n[1])
		}
		s, err := explain.Open(ctx, args[0], workers)
		if err != nil {
			return misuse(err)
		}
		defer s.Close()
		p.doubt(mapsOf(args[0])...)
		ix, iy := s.Find(n[0], n[1])
		if polar != "" {
			ix, iy = s.FindPolar(n[0], n[1])
		}
		v, err := s.At(ix, iy)
		if outside := (*explain.OutsideError)(nil); errors.As(err, &outside) {
			return misusef("--%s %s: %w", flag, value, err)
		} else if err != nil {
			return err
		}
		if err := figure.write(func(f report.Format) []byte { return report.PixelFigure(v, f) }); err != nil {
			return err
		}
		if json {
			return writeJSON(p.stdout, v)
		}
		return printPixel(p.stdout, v)
	})
	f := cmd.Flags()
	f.StringVar(&at, "at", "", "pixel at helioprojective `X,Y` [arcsec], X toward solar west")
	f.StringVar(&polar, "polar", "", "pixel at position angle and projected distance from the Sun's centre, `PA,R` [deg, solar radii]")
	f.Var(&figure, "figure", "draw line of sight, time-distance map and lags into this PNG or SVG `file`")
	f.BoolVar(&json, "json", false, "one JSON document, with the curves")
	f.IntVar(&workers, "workers", 0, "cores to use; 0: all")
	return cmd
}

// printPixel writes an answer for people.
func printPixel(out io.Writer, v *explain.Pixel) error {
	w := tabwriter.NewWriter(out, 0, 0, 2, ' ', 0)
	print := func(format string, args ...any) { fmt.Fprintf(w, format+"\n", args...) }
	at := &v.Place
	print("pixel (%d, %d) at solar X %.1f, Y %.1f arcsec: %.3f solar radii, position angle %.1f deg, structure %s\n", at.X, at.Y, at.SolarX, at.SolarY, at.Height, at.PA, at.Class)
	print("%s\n", wrap(v.Verdict, 100))
	printValues(print, v)
	printCauses(print, v)
	printSight(print, v)
	printTracker(print, v)
	for _, f := range v.Flags {
		text := f.About
		if f.Detail != "" {
			text += ": " + f.Detail
		}
		print("flag\t%s\t%s", f.Name, text)
	}
	for _, c := range v.Cautions {
		print("caution\t%s", c)
	}
	return w.Flush()
}

func printValues(print func(string, ...any), v *explain.Pixel) {
	t, q, r := &v.Truth, &v.Inferred, &v.Ratios
	print("\tinferred\terror\ttrue, x = 0\tratio\tratio to emission mean\tratio to wave mean")
	print("field/G\t%s\t%s\t%s\t%s\t%s\t%s", num(q.Field), num(q.FieldErr), num(t.FieldSky), num(r.FieldSky), num(r.FieldEmission), num(r.FieldWave))
	print("speed/(km/s)\t%s\t%s\t%s\t%s\t\t%s", num(q.Speed), num(q.SpeedErr), num(t.SpeedSky), num(r.SpeedSky), num(r.SpeedWave))
	print("density/cm-3\t%s\t%s\t%s\t%s\t%s\t", num(q.Ne), num(q.NeErr), num(t.NeSky), num(r.DensitySky), num(r.DensityEmission))
	print("angle/deg\t%s\t%s\t%s\t%s (difference)\t\t\n", num(q.Angle), num(q.AngleErr), num(t.AngleSky), num(r.AngleDiff))
}

func printCauses(print func(string, ...any), v *explain.Pixel) {
	print("cause\tfactor of B/B_SKY")
	for _, c := range v.Causes {
		if math.Abs(float64(c.Ln)) < 0.0005 {
			continue
		}
		print("%s\t%s\t%s", c.Name, num(c.Factor), c.Text)
	}
	i := &v.Identity
	print("all together\t%s\tspeed %s, density %s, mu %s, density felt by the wave %s\n", num(exp(i.Field)), num(exp(i.Speed)), num(exp(i.Density)), num(exp(i.Mu)), num(exp(i.Kink)))
}

func printSight(print func(string, ...any), v *explain.Pixel) {
	s, d := &v.Sight, &v.Density
	print("emission\t50 %% within %.2f, 90 %% within %.2f solar radii of the plane of the sky; %.0f %% within 0.1; centre at x = %.2f", s.Depth50, s.Depth90, 100*s.NearSky, s.Centre)
	print("wave power\t50 %% within %.2f, 90 %% within %.2f solar radii; %.0f %% within 0.1; centre at x = %.2f; %.0f %% runs inward", s.WaveDepth50, s.WaveDepth90, 100*s.WaveNear, s.WaveCentre, 100*s.Inward)
	print("field\t%.0f deg out of the plane of the sky at x = 0, %.0f deg where the waves are", s.Tilt, s.WaveTilt)
	for _, q := range s.Structures {
		where := ""
		if q.Main {
			where = " (holds the plane of the sky)"
		}
		print("structure\tpeak at x = %.2f, %.2f solar radii from the Sun's centre, %s: %.0f %% of the emission, %.0f %% of the wave power%s", q.X, q.Height, q.Class, 100*q.Emission, 100*q.Wave, where)
	}
	print("density\tmean that emits the 1074.7 nm line %s, the 1079.8 nm line %s cm-3", num(d.Line1), num(d.Line2))
	print("\tby the ratio: of this line of sight %s, without fine structure %s, of the plane alone %s cm-3", num(d.Sight), num(d.Smooth), num(d.Local))
}

func printTracker(print func(string, ...any), v *explain.Pixel) {
	t, n := &v.Track, &v.Noise
	if t.Points == 0 {
		print("track\tnone; coherence island of %d pixels", t.Island)
	} else {
		print("track\t%d points, %.0f Mm (%.0f inward, %.0f outward): %s wavelengths at the inferred speed, %.2f at the true one; %.0f deg off the field; island of %d pixels",
			t.Points, t.Length, t.Inner, t.Outer, num(t.Wavelengths), t.True, t.Off, t.Island)
	}
	for _, e := range v.Estimators {
		plane := ""
		if !math.IsNaN(float64(e.OnePlane)) {
			plane = fmt.Sprintf(", of the run's own waves on one plane %s", num(e.OnePlane))
		}
		print("estimator\t%s: %s km/s, error %s; of a plane wave it makes %s, along the true speeds and directions %s%s", e.Name, num(e.Speed), num(e.SpeedErr), num(e.Plane), num(e.Path), plane)
	}
	noise := "the run has no noise"
	if !n.NoiselessRun {
		noise = fmt.Sprintf("noise in the band %s km/s, ratio %s", num(n.InBand), num(n.SignalNoise))
	}
	print("Doppler rms\t%s km/s of waves, %s of those at x = 0; %s", num(n.Doppler), num(n.Reduction), noise)
}

// num prints a number with three digits, or a dash for none.
func num(x explain.Number) string {
	v := float64(x)
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return "-"
	}
	if v >= 1e5 {
		return units.Scientific(v, 2)
	}
	return strconv.FormatFloat(v, 'g', 3, 64)
}

func exp(x explain.Number) explain.Number { return explain.Number(math.Exp(float64(x))) }

// wrap breaks lines at spaces.
func wrap(s string, width int) string {
	var lines []string
	line := ""
	for _, word := range strings.Fields(s) {
		if line != "" && utf8.RuneCountInString(line+word) >= width {
			lines, line = append(lines, line), ""
		}
		if line != "" {
			line += " "
		}
		line += word
	}
	return strings.Join(append(lines, line), "\n")
}

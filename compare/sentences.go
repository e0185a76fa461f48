package compare

import (
	"fmt"
	"strings"

	"offplane/compare/stat"
)

// Sentences says the verdict in three sentences with numbers: field, speed,
// density, each as the median ratio to the truth at the plane of the sky with its
// 16 to 84 per cent range.
func (s *Summary) Sentences() []string {
	say := func(q *stat.Summary, what, truth, missing string) string {
		switch {
		case q == nil:
			return missing
		case q.Count == 0:
			return fmt.Sprintf("No pixel has %s that could be held against %s.", what, truth)
		}
		return fmt.Sprintf("In the median %s is %.2f times %s (16–84 %%: %.2f–%.2f)", what, q.Median, truth, q.P16, q.P84)
	}
	field := say(s.Ratios.Field.Sky, "the inferred field", "the true component of the field in the plane of the sky", "The field was not compared: an inferred or a true map of it is missing.")
	if f := s.Ratios.Field.Sky; f != nil && f.Count > 0 {
		field += fmt.Sprintf(", over the %d valid pixels, %.0f %% of the field's %d.", s.Pixels.Valid, 100*float64(s.Pixels.ValidFraction), s.Pixels.Total)
	}
	speed := say(s.Ratios.Speed.Sky, "the inferred phase speed", "the true kink speed projected on the sky, without flow", "The phase speed was not compared: an inferred or a true map of it is missing.")
	density := say(s.Ratios.Density.Sky, "the density from the line ratio", "the true electron density at the plane of the sky", "The density was not compared: an inferred or a true map of it is missing.")
	if d := s.Ratios.Density.Sky; d != nil && d.Count > 0 {
		density += ", and the field goes as its square root."
	}
	if !strings.HasSuffix(speed, ".") {
		speed += "."
	}
	return []string{field, speed, density}
}

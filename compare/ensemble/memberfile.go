package ensemble

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"

	"offplane/compare"
	"offplane/scenarios"
	"offplane/synth/fits"
)

// Tables of a member's file beside PIXELS.
const (
	parametersTable = "PARAMETERS"
	heightsTable    = "HEIGHTS"
	flagsTable      = "FLAGS"
	scenarioTable   = "SCENARIO"
)

const memberHDUs = 6 // the empty primary one and the tables

// write writes the file of the member: binary tables under an empty primary HDU.
func (m *Member) write(path string) error {
	w, err := fits.Create(path, fits.Header{
		{Key: "CREATOR", Value: "offplane " + m.Version},
		{Key: "ENSSHA", Value: m.Ensemble, Comment: ""},
		{Key: "MEMBER", Value: m.Number, Comment: "number in the ensemble, from 0"},
	})
	if err != nil {
		return err
	}
	defer w.Abort()
	for _, t := range []fits.Table{m.pixels, m.parameters(), m.heights(), m.flags(), m.scenario()} {
		if err := w.AddTable(t); err != nil {
			return err
		}
	}
	return w.Close()
}

func (m *Member) parameters() fits.Table {
	var paths, texts []string
	for _, v := range m.Values {
		paths, texts = append(paths, v.Path), append(texts, v.Text)
	}
	return fits.Table{Name: parametersTable, Columns: []fits.Column{
		{Name: "path", About: "in the scenario", Data: paths}, {Name: "value", About: "as in YAML", Data: texts},
	}}
}

func (m *Member) heights() fits.Table {
	n := len(m.Heights)
	from, to, total, valid := make([]float64, n), make([]float64, n), make([]int32, n), make([]int32, n)
	for i, h := range m.Heights {
		from[i], to[i], total[i], valid[i] = h.From, h.To, int32(h.Total), int32(h.Valid)
	}
	return fits.Table{Name: heightsTable, Columns: []fits.Column{
		{Name: "from", Unit: "solRad", Data: from}, {Name: "to", Unit: "solRad", Data: to},
		{Name: "pixels", About: "of the field", Data: total}, {Name: "valid", About: "with a B of the first estimator", Data: valid},
	}}
}

func (m *Member) flags() fits.Table {
	n := len(m.Flags)
	names, about, pixels, invalid := make([]string, n), make([]string, n), make([]int32, n), make([]int32, n)
	for i, f := range m.Flags {
		names[i], about[i], pixels[i], invalid[i] = f.Name, f.About, int32(f.Pixels), int32(f.Invalid)
	}
	return fits.Table{Name: flagsTable, Columns: []fits.Column{
		{Name: "name", About: "bit of FLAG, from bit 0", Data: names}, {Name: "about", Data: about},
		{Name: "pixels", About: "with this bit", Data: pixels}, {Name: "invalid", About: "of these, without a valid B", Data: invalid},
	}}
}

func (m *Member) scenario() fits.Table {
	t := fits.Table{Name: scenarioTable, Columns: []fits.Column{{Name: "yaml", About: "resolved scenario", Data: [][]byte{m.Scenario.Canonical}}}}
	t.Header.Set("SCENNAME", m.Scenario.Name, "name of the scenario")
	t.Header.Set("SCENSHA", m.Scenario.SHA256, "")
	for i, f := range m.Files {
		t.Header.Set(fmt.Sprintf("FILE%d", i+1), f.Name, "")
		t.Header.Set(fmt.Sprintf("FILSHA%d", i+1), f.SHA256, "")
	}
	return t
}

// ReadMember reads the file of one member and checks the sums of its data.
func ReadMember(path string) (*Member, error) {
	f, err := fits.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	m, err := identify(f)
	if err != nil {
		return nil, err
	}
	pixels, err := f.Table("PIXELS")
	if err != nil {
		return nil, err
	}
	m.pixels = *pixels
	if m.Ints("FLAG") == nil {
		return nil, fmt.Errorf("%s[PIXELS]: no column FLAG of integers", path)
	}
	for _, read := range []func(*fits.File) error{m.readParameters, m.readHeights, m.readFlags, m.readScenario} {
		if err := read(f); err != nil {
			return nil, err
		}
	}
	return m, f.Verify()
}

// Identify reads the headers of a member's file, which must hold the data they tell of,
// and returns its number, ensemble and version only.
func Identify(path string) (*Member, error) {
	f, err := fits.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return identify(f)
}

func identify(f *fits.File) (*Member, error) {
	m := &Member{}
	var ok [2]bool
	primary := f.HDUs[0].Header
	m.Ensemble, ok[0] = primary.Text("ENSSHA")
	m.Number, ok[1] = primary.Int("MEMBER")
	if !ok[0] || !ok[1] {
		return nil, fmt.Errorf("%s: not a member of an ensemble: the cards ENSSHA and MEMBER are missing", f.Name)
	}
	creator, _ := primary.Text("CREATOR")
	fmt.Sscanf(creator, "offplane %s", &m.Version)
	// The writer closes each HDU; a file cut between two of them has too few.
	if len(f.HDUs) != memberHDUs {
		return nil, fmt.Errorf("%s: has %d HDUs, a member has %d", f.Name, len(f.HDUs), memberHDUs)
	}
	return m, nil
}

// A reading is a table that is read column by column; the first error stays.
type reading struct {
	t   *fits.Table
	err error
}

func read(f *fits.File, name string) *reading {
	t, err := f.Table(name)
	return &reading{t, err}
}

func column[T any](r *reading, name string, get func(*fits.Table, string) ([]T, error)) (x []T) {
	if r.err == nil {
		x, r.err = get(r.t, name)
	}
	return x
}

func (m *Member) readParameters(f *fits.File) error {
	r := read(f, parametersTable)
	paths, texts := column(r, "path", (*fits.Table).Strings), column(r, "value", (*fits.Table).Strings)
	for i := range texts {
		m.Values = append(m.Values, Value{paths[i], texts[i]})
	}
	return r.err
}

func (m *Member) readHeights(f *fits.File) error {
	r := read(f, heightsTable)
	from, to := column(r, "from", (*fits.Table).Floats), column(r, "to", (*fits.Table).Floats)
	pixels, valid := column(r, "pixels", (*fits.Table).Ints), column(r, "valid", (*fits.Table).Ints)
	for i := range valid {
		m.Heights = append(m.Heights, Height{from[i], to[i], int(pixels[i]), int(valid[i])})
	}
	return r.err
}

func (m *Member) readFlags(f *fits.File) error {
	r := read(f, flagsTable)
	names, about := column(r, "name", (*fits.Table).Strings), column(r, "about", (*fits.Table).Strings)
	pixels, invalid := column(r, "pixels", (*fits.Table).Ints), column(r, "invalid", (*fits.Table).Ints)
	for i := range invalid {
		m.Flags = append(m.Flags, compare.Flag{Name: names[i], About: about[i], Pixels: int(pixels[i]), Invalid: int(invalid[i])})
	}
	return r.err
}

func (m *Member) readScenario(f *fits.File) error {
	t, err := f.Table(scenarioTable)
	if err != nil {
		return err
	}
	text, err := t.Bytes("yaml", 0)
	if err != nil {
		return err
	}
	want, _ := t.Header.Text("SCENSHA")
	if sum := sha256.Sum256(text); hex.EncodeToString(sum[:]) != want {
		return fmt.Errorf("%s[%s]: the SHA-256 of the scenario is %x, the header says %q", f.Name, scenarioTable, sum, want)
	}
	name, _ := t.Header.Text("SCENNAME")
	if m.Scenario, err = scenarios.Parse(name, text); err != nil {
		return fmt.Errorf("%s[%s]: %w", f.Name, scenarioTable, err)
	}
	// A later version of the program may fill in more defaults; the member was computed
	// from what stands in the file.
	m.Scenario.Canonical, m.Scenario.SHA256 = text, want
	for i := 1; ; i++ {
		name, ok := t.Header.Text(fmt.Sprintf("FILE%d", i))
		if !ok {
			return nil
		}
		sum, _ := t.Header.Text(fmt.Sprintf("FILSHA%d", i))
		m.Files = append(m.Files, compare.File{Name: name, SHA256: sum})
	}
}

package plots

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"io/fs"
	"maps"
	"path"
	"slices"
	"strings"

	"yearflow/sim/tables"
)

// Record is what a report says of a run from its run.json: the inputs by hash, the
// limits by source, what was assumed. Other reports take their closing sections from
// it.
type Record struct {
	Title       string            `json:"title"`
	Case        string            `json:"case"`
	Version     string            `json:"version"`
	Zone        string            `json:"zone"`
	Begins      string            `json:"begins"`
	Percentiles string            `json:"percentiles"`
	Assumed     []RecordNote      `json:"assumed"`
	Warnings    []RecordNote      `json:"warnings"`
	StillMoving []string          `json:"still_moving_at_start_up"`
	Inputs      map[string]string `json:"inputs_sha256"`
	Results     map[string]string `json:"results_sha256"`
	Limits      struct {
		Range   string        `json:"range"`
		Judge   string        `json:"judge"`
		Classes []recordClass `json:"classes"`
	} `json:"limits"`
	Coarse struct {
		TooCoarse  bool     `json:"too_coarse"`
		Regulators []string `json:"regulators"`
	} `json:"coarse_step"`
	Hunting []struct {
		Time, Device string
	} `json:"hunting"`
	Trouble []struct {
		Time, Status, Where string
	} `json:"first_low_and_unsolved_steps"`
	Profiles []struct {
		Files       []string
		Stamped     string
		Interpolate bool
		Repeat      string
		Zone        string
	} `json:"profiles"`

	numbers map[string]any
}

// RecordNote is something assumed or odd at a place of the inputs.
type RecordNote struct {
	File         string `json:"file"`
	Line, Column int
	Text         string `json:"text"`
}

// Place is file:line:column, without what is not known.
func (n RecordNote) Place() string {
	return tables.Pos{File: n.File, Line: n.Line, Column: n.Column}.String()
}

type recordClass struct {
	Class, Source string
	Low, High     json.Number
	OuterLow      json.Number `json:"outer_low"`
	OuterHigh     json.Number `json:"outer_high"`
}

// ReadRecord reads run.json of a results folder.
func ReadRecord(folder fs.FS) (*Record, error) {
	data, err := fs.ReadFile(folder, "run.json")
	if err != nil {
		return nil, err
	}
	r := &Record{}
	broken := func(err error) error {
		return tables.Faults{{Pos: tables.Pos{File: "run.json"}, Text: fmt.Sprintf("is not a run's record (%v): run the study again", err)}}
	}
	if err := json.Unmarshal(data, r); err != nil {
		return nil, broken(err)
	}
	dec := json.NewDecoder(bytes.NewReader(data))
	dec.UseNumber()
	if err := dec.Decode(&r.numbers); err != nil {
		return nil, broken(err)
	}
	return r, nil
}

// Value returns a number of run.json: that under key, or under key in group.
func (r *Record) Value(group, key, unit string) Value {
	in := r.numbers
	if group != "" {
		in, _ = r.numbers[group].(map[string]any)
	}
	n, ok := in[key].(json.Number)
	if !ok {
		return Word("–")
	}
	return Number(n.String(), unit, SourceOf("run.json", key, group))
}

// Fingerprint is a short mark of all inputs: the first twelve digits of the SHA-256 of
// their names and hashes, one a line, sorted by name.
func (r *Record) Fingerprint() string {
	if len(r.Inputs) == 0 {
		return ""
	}
	sum := sha256.New()
	for _, name := range slices.Sorted(maps.Keys(r.Inputs)) {
		fmt.Fprintf(sum, "%s  %s\n", r.Inputs[name], name)
	}
	return hex.EncodeToString(sum.Sum(nil))[:12]
}

// Trace names the case and the inputs, for the foot of every page and figure.
func (r *Record) Trace() string {
	t := "case " + r.Case
	if f := r.Fingerprint(); f != "" {
		t += " · inputs " + f
	}
	return t
}

// InputsSection lists the inputs and the tables of the results by hash. Figures and
// the report are not listed: they are drawn from these.
func (r *Record) InputsSection() Section {
	s := Section{Heading: "Inputs and results by hash"}
	if len(r.Inputs) == 0 {
		s.Blocks = append(s.Blocks, Paragraph{Plain("The run recorded no hashes of its inputs.")})
	} else {
		s.Blocks = append(s.Blocks, Paragraph{Plain(fmt.Sprintf("The figures and page feet name the inputs as %s: the first twelve digits of the SHA-256 of the list below (hash, two spaces, name, one a line, sorted by name). Version %s of yearflow made the results. The same inputs and version give the same bytes.", r.Fingerprint(), r.Version))},
			hashes("Inputs, in the study's folder", r.Inputs))
	}
	if len(r.Results) > 0 {
		tables := maps.Clone(r.Results)
		maps.DeleteFunc(tables, func(name, _ string) bool { return !strings.HasSuffix(name, ".csv") })
		s.Blocks = append(s.Blocks, hashes("Tables of the results", tables))
	}
	return s
}

func hashes(caption string, files map[string]string) Table {
	t := Table{Caption: caption, Columns: []Column{{Head: "File", Words: true}, {Head: "SHA-256", Words: true}}}
	for _, name := range slices.Sorted(maps.Keys(files)) {
		t.Rows = append(t.Rows, []Value{Word(name), Word(files[name])})
	}
	return t
}

// LimitsSection says which voltages count, where, and after which source.
func (r *Record) LimitsSection() Section {
	t := Table{Caption: "Voltage limits", Columns: []Column{{Head: "Nominal voltage", Words: true}, {Head: "Range B from", Unit: "p.u."},
		{Head: "Range A from", Unit: "p.u."}, {Head: "Range A to", Unit: "p.u."}, {Head: "Range B to", Unit: "p.u."}, {Head: "Source", Words: true}}}
	if r.Limits.Range == "own" {
		t.Note = Plain("The study gives its own numbers in [limits]: its inner range stands for range A and its outer for range B.")
	}
	for _, c := range r.Limits.Classes {
		row := []Value{Word(c.Class)}
		for _, n := range []json.Number{c.OuterLow, c.Low, c.High, c.OuterHigh} {
			row = append(row, Rounded(n.String(), "pu", "", 4))
		}
		t.Rows = append(t.Rows, append(row, Word(c.Source)))
	}
	judged := "nodes with a load"
	if r.Limits.Judge == "all" {
		judged = "all nodes"
	}
	s := Section{Heading: "Limits and their sources"}
	if len(t.Rows) > 0 {
		s.Blocks = append(s.Blocks, t)
	}
	s.Blocks = append(s.Blocks, List{Items: []Text{
		Say("Judged are " + judged + "; the others are reported and never counted. Each phase counts by itself; where nothing grounds a node, its voltages are line-to-line."),
		Say("The allowance from primary to meter is {}, on the 120 V base, at a load's own peak and in proportion to its power.", r.Value("limits", "allowance_volts", "V")),
		Say("Unbalance is the largest deviation of the line-to-line voltages from their mean, over the mean, at three-phase nodes; 3 % is the limit of ANSI C84.1 for a supply at no load."),
		Say("Ratings are those of the tables, or of the built-in handbook where assumed so (see the assumptions). Transformers are rated in kVA, everything else in A."),
		Say("Hours, lowest and highest voltages and percentiles are those of settled intervals (no control asks for an action) in steps that were solved. Percentiles are " + or(r.Percentiles, "weighted by duration") + "."),
	}})
	return s
}

func or(s, otherwise string) string {
	if s == "" {
		return otherwise
	}
	return s
}

// AssumptionsSection lists what blank cells were taken for.
func (r *Record) AssumptionsSection() Section {
	s := Section{Heading: "What was assumed"}
	if r.Assumed == nil {
		s.Blocks = []Block{Paragraph{Plain("The run did not record what it assumed (an older version wrote it); \"yearflow check\" lists it.")}}
		return s
	}
	tables, _ := r.split(r.Assumed)
	if len(tables) == 0 {
		s.Blocks = []Block{Paragraph{Plain("Nothing: no cell that matters was left blank.")}}
		return s
	}
	s.Blocks = []Block{Paragraph{Plain("Cells that were left blank were taken for the following. A typical value is no measurement: the ones of transformers move losses and voltages most.")},
		notes(fmt.Sprintf("Assumed for blank cells (%d)", len(tables)), "Taken", tables)}
	return s
}

// DataSection lists what was filled in, mended or odd about the inputs.
func (r *Record) DataSection() Section {
	s := Section{Heading: "Mended and odd data"}
	_, filled := r.split(r.Assumed)
	odd, mended := r.split(r.Warnings)
	mended = append(slices.Clone(filled), mended...)
	if len(mended) == 0 {
		s.Blocks = append(s.Blocks, Paragraph{Plain("The run warned of no value of a profile or weather file that it filled in, mended or doubted.")})
	} else {
		s.Blocks = append(s.Blocks, notes(fmt.Sprintf("Profiles, meters and weather: filled in, mended or doubted (%d)", len(mended)), "What", mended))
	}
	if len(odd) == 0 {
		s.Blocks = append(s.Blocks, Paragraph{Plain("The tables held nothing possible but implausible that the run warned of.")})
	} else {
		s.Blocks = append(s.Blocks, notes(fmt.Sprintf("Tables: possible, but odd (%d)", len(odd)), "What", odd))
	}
	var read []Text
	for _, p := range r.Profiles {
		text := "Profiles " + strings.Join(p.Files, ", ") + ": values stamped at the " + or(p.Stamped, "start") + " of their interval"
		if p.Stamped == "instant" {
			text = "Profiles " + strings.Join(p.Files, ", ") + ": values of an instant"
		}
		if p.Interpolate {
			text += ", straight lines between them"
		}
		if p.Repeat != "" && p.Repeat != "none" {
			text += ", repeated by the " + p.Repeat
		}
		if p.Zone != "" {
			text += ", in the zone " + p.Zone
		}
		read = append(read, Plain(text+"."))
	}
	if read != nil {
		s.Blocks = append(s.Blocks, List{Items: read})
	}
	return s
}

// feederTables are the names of a feeder's tables; every other file holds data in time.
var feederTables = [...]string{"source.csv", "nodes.csv", "sections.csv", "switches.csv", "constructions.csv", "impedances.csv", "spacings.csv",
	"conductors.csv", "cables.csv", "transformers.csv", "regulators.csv", "regulator-settings.csv", "capacitors.csv", "capacitor-settings.csv",
	"loads.csv", "energies.csv", "zip.csv", "generators.csv", "batteries.csv", "chargers.csv", "inverter-functions.csv"}

// split parts notes about the study's tables and settings from those about data files.
func (r *Record) split(all []RecordNote) (tables, data []RecordNote) {
	for _, n := range all {
		if n.File == "" || n.File == "study.toml" || strings.HasPrefix(n.File, "cases/") || slices.Contains(feederTables[:], path.Base(n.File)) {
			tables = append(tables, n)
		} else {
			data = append(data, n)
		}
	}
	return tables, data
}

func notes(caption, head string, list []RecordNote) Table {
	t := Table{Caption: caption, Columns: []Column{{Head: "Place", Words: true}, {Head: head, Words: true}}}
	for _, n := range list {
		t.Rows = append(t.Rows, []Value{Word(n.Place()), Word(n.Text)})
	}
	return t
}

// Disclaimer says, on the first page of every report, what a year of power flows does
// not show.
func Disclaimer() Caution {
	return Caution{Title: "What is not studied, and who decides", Items: []Text{
		Plain("Not studied: protection and its coordination, fault duty, unintended islanding, harmonics, flicker, temporary and transient overvoltage, motor starting, and anything faster than the controls' delays."),
		Plain("This is an estimate by a model. It does not replace local codes, the standards of the utility or the judgement of a licensed engineer, which take precedence; settings are entered only by the people who answer for them, after their own check."),
	}}
}

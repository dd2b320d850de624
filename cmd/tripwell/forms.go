package main

import (
	"encoding/json"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"text/tabwriter"

	"tripwell/forms"
	"tripwell/static"
)

type formsCmd struct {
	List   formsListCmd   `cmd:"" default:"withargs" help:"List what is shipped; forms alone does the same."`
	Export formsExportCmd `cmd:"" help:"Write forms to a file."`
	Import formsImportCmd `cmd:"" help:"Take forms in from a file."`
}

// Help is shown by --help.
func (formsCmd) Help() string { return formsListCmd{}.Help() }

type formsListCmd struct {
	JSON bool `help:"Write one JSON document instead of text." name:"json"`
}

// Help is shown by --help.
func (formsListCmd) Help() string {
	return `Lists the shipped device kinds and tasks, what each form asks, and every limit with its source and how far that source was seen.

Examples:

  tripwell forms
  tripwell forms --json > forms.json`
}

// formsDocument is what forms --json writes.
type formsDocument struct {
	Judge    int          `json:"judge"`
	Kinds    []kindRow    `json:"kinds"`
	Tasks    []string     `json:"tasks"`
	Readings []forms.Code `json:"readings"`
	Missing  []string     `json:"missing"`
	*forms.Catalogue
}

type kindRow struct {
	Kind     string            `json:"kind"`
	LimitSet string            `json:"limit_set,omitempty"`
	Forms    map[string]string `json:"forms"` // task → form
}

func kindRows() []kindRow {
	var rows []kindRow
	for _, kind := range forms.Kinds() {
		row := kindRow{Kind: kind, LimitSet: forms.DefaultLimitSet(kind, false), Forms: map[string]string{}}
		for _, task := range forms.TasksOf(kind) {
			row.Forms[task], _ = forms.FormFor(kind, task)
		}
		rows = append(rows, row)
	}
	return rows
}

// Run lists what is shipped.
func (c formsListCmd) Run(e *env) error {
	if c.JSON {
		enc := json.NewEncoder(e.stdout)
		enc.SetEscapeHTML(false)
		enc.SetIndent("", " ")
		return enc.Encode(formsDocument{forms.JudgeVersion, kindRows(), forms.Tasks(), forms.Codes(), forms.MissingReasons(), forms.Shipped()})
	}
	words, err := static.ReadWords("en")
	if err != nil {
		return err
	}
	w := tabwriter.NewWriter(e.stdout, 0, 0, 2, ' ', 0)
	writeKinds(w, words)
	writeLamps(w, words)
	for _, f := range forms.Shipped().Forms {
		writeForm(w, words, f)
	}
	for _, s := range forms.Shipped().LimitSets {
		writeLimitSet(w, words, s)
	}
	return w.Flush()
}

func writeKinds(w io.Writer, words *static.Words) {
	fmt.Fprintln(w, "KIND\tNAME\tLIMIT SET\tFORMS")
	for _, row := range kindRows() {
		var ids []string
		for _, task := range forms.Tasks() {
			if id, ok := row.Forms[task]; ok && !slices.Contains(ids, id) {
				ids = append(ids, id)
			}
		}
		fmt.Fprintf(w, "%s\t%s\t%s\t%s\n", row.Kind, words.Say("kind."+row.Kind), dash(row.LimitSet), dash(strings.Join(ids, ", ")))
	}
}

// writeLamps writes what three lamps can show.
func writeLamps(w io.Writer, words *static.Words) {
	state := map[bool]string{true: words.Say("option.lamps.on"), false: words.Say("option.lamps.off")}
	fmt.Fprintf(w, "\n%s\n", words.Say("option.lamps.title"))
	for _, l := range forms.LampTable() {
		var also []string
		for _, condition := range l.AlsoReads {
			also = append(also, words.Say("option.lamps."+condition))
		}
		fmt.Fprintf(w, "  %s\t%s\t%s\t%s\t%s\n", state[l.HotNeutral], state[l.HotGround], state[l.NeutralGround], words.Say("option.wiring."+l.Wiring), dash(strings.Join(also, "; ")))
	}
}

func dash(s string) string {
	if s == "" {
		return "–"
	}
	return s
}

func writeForm(w io.Writer, words *static.Words, f *forms.Form) {
	fmt.Fprintf(w, "\nFORM %s, revision %d: %s of %s\n", f.ID, f.Revision, words.Say("task."+f.Task), strings.Join(f.Kinds, ", "))
	for _, step := range f.Steps {
		if len(step.Asks) > 0 && step.Proves != "" {
			fmt.Fprintf(w, " %s. %s %s\n", words.Say("step."+step.Step), words.Say(step.Proves), words.Say(step.ProvesNot))
		}
		for _, a := range step.Asks {
			need := "optional"
			switch {
			case a.Required && len(a.When) > 0:
				need = "required where asked"
			case a.Required:
				need = "required"
			case a.Expected:
				need = "expected"
			}
			answers := strings.Join(a.Options, ", ")
			if a.Type == forms.TypeYesNo {
				answers = "yes, no"
			} else if a.Unit != "" {
				answers = "in " + words.Say("unit."+a.Unit)
			}
			fmt.Fprintf(w, "  %s\t%s\t%s\t%s\n", words.Say("step."+step.Step), a.Reading, need, answers)
		}
	}
	if f.Series == nil {
		return
	}
	for _, c := range f.Series.Conditions {
		need := "required"
		if len(c.When) > 0 {
			need = "required where it applies"
		}
		fmt.Fprintf(w, "  %s\t%s\t%s\tat %s\n", words.Say("step."+f.Series.Step), strings.Join(c.AnyOf, " or "), need, conditions(c.At))
	}
}

func conditions(at map[string]any) string {
	var parts []string
	for name, v := range at {
		parts = append(parts, fmt.Sprintf("%s %v", name, v))
	}
	slices.Sort(parts)
	return strings.Join(parts, ", ")
}

func writeLimitSet(w io.Writer, words *static.Words, s *forms.LimitSet) {
	fmt.Fprintf(w, "\nLIMIT SET %s, revision %d, in force from %s, decides by %s: %s\n", s.ID, s.Revision, s.InForce, words.Say("verdict.rule."+s.Rule), words.Say("limit_set."+s.ID))
	for i := range s.Limits {
		l := &s.Limits[i]
		name := l.Reading
		if name == "" {
			name = l.Field
		}
		fmt.Fprintf(w, "  %s\t%s\t%s\t%s (%s)\n", name, l.Level, limitText(words, l), l.Source, l.Status)
	}
}

// limitText says a limit in a few words.
func limitText(words *static.Words, l *forms.Limit) string {
	unit := ""
	if l.Unit != "" {
		unit = " " + words.Say("unit."+l.Unit)
	}
	switch {
	case l.Curve != "":
		return "at most (20/I)^1.43 s at I mA"
	case l.OfRated != nil:
		return rangeText(words, l.OfRated.Min, l.OfRated.Max) + " × rated residual current"
	case l.OverRated != 0:
		return words.Say("verdict.at_most", "n", number(l.OverRated/1000)+" V / rated residual current")
	case l.OverRange:
		return words.Say("verdict.over_range")
	case l.PerLength != nil:
		return words.Say("verdict.per_length", "n", number(l.PerLength.Base)+unit)
	case l.ByMultiple != nil:
		var parts []string
		for _, r := range l.ByMultiple {
			text := rangeText(words, r.Min, r.Max) + " ms"
			if r.NoTrip {
				text = words.Say("verdict.must_hold")
			}
			parts = append(parts, number(r.Multiple)+"×: "+text)
		}
		return strings.Join(parts, "; ")
	case l.Flag:
		return "flagged where it applies"
	case len(l.OneOf) > 0:
		return strings.Join(l.OneOf, ", ")
	}
	text := rangeText(words, l.Min, l.Max) + unit
	for other, b := range l.ByUnit {
		text += "; " + rangeText(words, b.Min, b.Max) + " " + other
	}
	return text
}

func rangeText(words *static.Words, least, most *float64) string {
	switch {
	case least != nil && most != nil:
		return words.Say("verdict.between", "from", number(*least), "to", number(*most))
	case least != nil:
		return words.Say("verdict.at_least", "n", number(*least))
	case most != nil:
		return words.Say("verdict.at_most", "n", number(*most))
	}
	return ""
}

func number(v float64) string { return strconv.FormatFloat(v, 'f', -1, 64) }

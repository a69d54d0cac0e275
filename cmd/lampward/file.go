package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"text/tabwriter"

	"lampward/domain"
	"lampward/domain/handover"
	"lampward/domain/review"
	"lampward/domain/site"
)

// matched says how the columns of somebody's own sheet are matched.
type matched struct {
	Columns string `help:"For somebody's own sheet: a JSON file that says which column holds what. Where it is not there it is written, as proposed, for you to correct." type:"path" placeholder:"FILE.json"`
}

// errProposed ends a run that wrote a proposal.
var errProposed = errors.New("correct it and run the same again")

// matching reads the file of the matching, or writes what is proposed where it is not there. It returns nil where none
// was asked for.
func (m matched) matching(b *handover.Book) (*handover.Matching, error) {
	if m.Columns == "" {
		return nil, nil
	}
	data, err := os.ReadFile(m.Columns)
	if errors.Is(err, os.ErrNotExist) {
		proposed, err := handover.Propose(b)
		if err != nil {
			return nil, err
		}
		out, err := json.MarshalIndent(proposed, "", "  ")
		if err != nil {
			return nil, err
		}
		if err := os.WriteFile(m.Columns, append(out, '\n'), 0o644); err != nil {
			return nil, err
		}
		return nil, fmt.Errorf("the matching of the columns is proposed in %s: %w", m.Columns, errProposed)
	}
	if err != nil {
		return nil, err
	}
	var out handover.Matching
	d := json.NewDecoder(bytes.NewReader(data))
	d.DisallowUnknownFields()
	if err := d.Decode(&out); err != nil {
		return nil, fmt.Errorf("%s is no matching: %w", m.Columns, err)
	}
	return &out, nil
}

type checkCommand struct {
	matched
	File   string `arg:"" help:"A survey workbook, a folder or zip of its csv sheets, a COBie workbook, or a sheet." type:"path"`
	Format string `enum:"table,json" default:"table" help:"table for people, or json."`
}

// Help shows examples.
func (checkCommand) Help() string {
	return `Examples:
  lampward check survey.xlsx
  lampward check handover.xlsx --format json
  lampward check list.csv --columns list.json

Judges a file without storing anything; no database is needed. The exit status is 0 where nothing above low is found, 1 where
something is, 2 where the file cannot be used.`
}

// Run judges the file.
func (c *checkCommand) Run(_ context.Context, s *streams) error {
	b, err := handover.Open(c.File)
	if err != nil {
		return err
	}
	m, err := c.matching(b)
	if err != nil {
		return err
	}
	r, err := handover.Parse(b, m)
	if err != nil {
		return err
	}
	rep, err := r.Check(s.clock())
	if err != nil {
		return err
	}
	if c.Format == "json" {
		enc := json.NewEncoder(s.out)
		enc.SetIndent("", "  ")
		enc.SetEscapeHTML(false)
		err = enc.Encode(rep)
	} else {
		err = s.report(&rep)
	}
	if err != nil {
		return err
	}
	for _, f := range rep.Findings {
		if f.Severity != "low" {
			return exit(1)
		}
	}
	return nil
}

// shown is how many of a kind of line a person sees at once.
const shown = 20

// report writes a check for people.
func (s *streams) report(rep *handover.Report) error {
	c := rep.Counts
	fmt.Fprintf(s.out, "%d spaces, %d circuits, %d dimmers, %d drivers, %d luminaires, %d lamps; %.0f %% of the luminaires can be judged\n",
		c.Spaces, c.Circuits, c.Dimmers, c.Drivers, c.Fixtures, c.Lamps, 100*rep.Coverage)
	for _, t := range rep.Told {
		fmt.Fprintf(s.out, "note: %s\n", t)
	}
	fmt.Fprintf(s.out, "\n%d findings\n", len(rep.Findings))
	for i, f := range rep.Findings {
		if i == shown {
			fmt.Fprintf(s.out, "... and %d more: --format json has them all\n", len(rep.Findings)-i)
			break
		}
		fmt.Fprintf(s.out, "\n%s  %s  [%s]\n  %s\n", strings.ToUpper(f.Severity), f.Subject, f.Rule, f.Sentence)
		for _, step := range f.Steps {
			fmt.Fprintf(s.out, "    %s: %s\n", step.What, step.Sum)
		}
		fmt.Fprintf(s.out, "  what to do: %s\n", f.Remedy)
	}
	if rep.Asked > 0 {
		fmt.Fprintf(s.out, "\nStill to find out, the most useful first (%d of %d):\n", len(rep.Questions), rep.Asked)
		w := tabwriter.NewWriter(s.out, 0, 0, 2, ' ', 0)
		fmt.Fprintln(w, "  PLACES\tABOUT\tWHAT")
		for _, q := range rep.Questions {
			fmt.Fprintf(w, "  %d\t%s\t%s\n", q.Settles, q.About, q.Ask)
		}
		if err := w.Flush(); err != nil {
			return err
		}
	}
	s.cells(rep.Cells, rep.CellCount)
	fmt.Fprintf(s.out, "\nA screening estimate from the file. Local codes and licensed practice decide.\n")
	return nil
}

// cells writes where a file could not be taken as it stands.
func (s *streams) cells(cells []handover.Cell, total int) {
	if total == 0 {
		return
	}
	fmt.Fprintf(s.out, "\n%d cells could not be taken as they stand:\n", total)
	for i, c := range cells {
		if i == shown {
			fmt.Fprintf(s.out, "  ... and %d more\n", total-i)
			break
		}
		fmt.Fprintf(s.out, "  %s, row %d, %s: %s\n", c.Sheet, c.Row, c.Column, c.Problem)
	}
}

type importCommand struct {
	database
	matched
	File     string `arg:"" help:"A survey workbook, a folder or zip of its csv sheets, a COBie workbook, or a sheet." type:"path"`
	Building string `help:"Code of the building to store it in; the file's own where left out."`
	DryRun   bool   `help:"Tell what would become of it and store nothing."`
	GoodRows string `help:"Take the rows that can be taken, and write the others to this workbook to be corrected." type:"path" placeholder:"BAD.xlsx"`
}

// Help shows examples.
func (importCommand) Help() string {
	return `Examples:
  lampward import survey.xlsx --dry-run
  lampward import handover.xlsx --building CLINIC
  lampward import list.csv --columns list.json --good-rows bad.xlsx

All of a file is stored or nothing, unless --good-rows is given. A second import of the same file changes nothing. The exit
status is 1 where rows were refused.`
}

// Run stores the file.
func (c *importCommand) Run(ctx context.Context, s *streams) error {
	b, err := handover.Open(c.File)
	if err != nil {
		return err
	}
	m, err := c.matching(b)
	if err != nil {
		return err
	}
	return with(ctx, s, c.database, func(o *opened) error {
		if m != nil {
			if err := handover.KeepMatching(ctx, o.pool, ours, s.clock(), m); err != nil {
				return err
			}
		}
		r, err := handover.Parse(b, m)
		if err != nil {
			return err
		}
		if c.Building != "" {
			r.Building.Code = c.Building
		}
		opt := handover.Options{By: ours, At: s.clock(), DryRun: c.DryRun, GoodRows: c.GoodRows != "", Progress: s.progress("rows")}
		if info, err := os.Stat(c.File); err == nil && !info.IsDir() {
			if opt.File, err = os.ReadFile(c.File); err != nil {
				return err
			}
		}
		res, err := handover.Store(ctx, o.pool, r, opt)
		refusal := new(handover.Refusal)
		if errors.As(err, &refusal) {
			s.cells(refusal.Result.Cells, refusal.Result.CellN)
			fmt.Fprintf(s.out, "\n%s\n", refusal.Error())
			return exit(1)
		}
		if err != nil {
			return err
		}
		return c.told(s, b, r, &res)
	})
}

func (c *importCommand) told(s *streams, b *handover.Book, r *handover.Register, res *handover.Result) error {
	verb := "Stored"
	if res.DryRun {
		verb = "Would store"
	}
	fmt.Fprintf(s.out, "%s in building %s: %d new, %d changed, %d unchanged records, %d new models; %d findings opened, %d cleared\n", verb, r.Building.Code,
		res.New, res.Changed, res.Unchanged, res.Models, res.Opened, res.Cleared)
	for _, t := range res.Told {
		fmt.Fprintf(s.out, "note: %s\n", t)
	}
	s.cells(res.Cells, res.CellN)
	if res.Refused == 0 {
		return nil
	}
	var bad bytes.Buffer
	if err := handover.WriteXLSX(&bad, r.BadRows(b)); err != nil {
		return err
	}
	if err := os.WriteFile(c.GoodRows, bad.Bytes(), 0o644); err != nil {
		return err
	}
	fmt.Fprintf(s.out, "\n%d rows were refused and are in %s to be corrected\n", res.Refused, c.GoodRows)
	return exit(1)
}

type exportCommand struct {
	database
	Building string `arg:"" optional:"" help:"Code of the building."`
	Output   string `short:"o" required:"" help:"Workbook (.xlsx) or zip of csv sheets (.zip) to write." type:"path"`
	Template bool   `help:"Write an empty survey workbook with notes instead."`
}

// Help shows examples.
func (exportCommand) Help() string {
	return `Examples:
  lampward export ALDER -o alder.xlsx
  lampward export ALDER -o alder.zip
  lampward export --template -o survey.xlsx

What goes out may be edited and imported again.`
}

// Run writes the file.
func (c *exportCommand) Run(ctx context.Context, s *streams) error {
	if c.Template == (c.Building != "") {
		return errors.New("name a building, or give --template")
	}
	if c.Template {
		return c.write(s, handover.Template())
	}
	return with(ctx, s, c.database, func(o *opened) error {
		read := domain.On(o.pool, domain.ID{}, ours, s.clock())
		b, err := site.BuildingByCode(ctx, read, c.Building)
		if err != nil {
			return fmt.Errorf("building %s: %w", c.Building, err)
		}
		cat, err := review.New().Shelf.At(ctx, o.pool)
		if err != nil {
			return err
		}
		tables, err := handover.Export(ctx, domain.On(o.pool, b.ID, ours, s.clock()), cat)
		if err != nil {
			return err
		}
		return c.write(s, tables)
	})
}

func (c *exportCommand) write(s *streams, tables []handover.Table) error {
	var out bytes.Buffer
	var err error
	switch strings.ToLower(filepath.Ext(c.Output)) {
	case ".xlsx":
		err = handover.WriteXLSX(&out, tables)
	case ".zip":
		err = handover.WriteCSV(&out, tables)
	default:
		return errors.New("the output must end in .xlsx or .zip")
	}
	if err != nil {
		return err
	}
	rows := 0
	for _, t := range tables {
		rows += len(t.Rows)
	}
	if err := os.WriteFile(c.Output, out.Bytes(), 0o644); err != nil {
		return err
	}
	fmt.Fprintf(s.out, "%s: %d sheets, %d rows\n", c.Output, len(tables), rows)
	return nil
}

// Package handover takes records in from files and gives them out: our own survey workbook, COBie hand-over workbooks, and
// anybody's sheet with its columns matched to fields. A file becomes a Register, which can be judged without a database
// and stored through the one door.
package handover

import (
	"archive/zip"
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"unicode/utf8"

	"github.com/xuri/excelize/v2"

	"lampward/domain"
)

// Limits of a file. A workbook is a zip file: what it unpacks to is bounded, whatever it says of itself.
const (
	MaxFile     = 64 << 20  // bytes as it lies on disk
	maxUnpacked = 512 << 20 // bytes of all parts
	maxPart     = 64 << 20  // bytes of one part that is held in memory
	maxRows     = 200_000   // of one sheet
	maxColumns  = 400
	maxCell     = 4_000 // characters
	mostCells   = 1_000 // told in one answer
)

// A Book is a file of sheets, whatever its form. Sheets are found by name; a row is the text of its cells.
type Book struct {
	Name   string
	order  []string
	sheets map[string][][]string
}

// Sheets returns the names of the sheets in their order.
func (b *Book) Sheets() []string { return b.order }

// Rows returns the rows of a sheet as they were read; the caller must not change them.
func (b *Book) Rows(sheet string) [][]string { return b.sheet(sheet) }

// sheet returns the rows of a sheet by its name in any case, nil where there is none.
func (b *Book) sheet(name string) [][]string {
	for _, n := range b.order {
		if strings.EqualFold(n, name) {
			return b.sheets[n]
		}
	}
	return nil
}

func (b *Book) add(name string, rows [][]string) {
	if b.sheets == nil {
		b.sheets = map[string][][]string{}
	}
	if _, there := b.sheets[name]; !there {
		b.order = append(b.order, name)
	}
	b.sheets[name] = rows
}

// errUnusable is a file that cannot be read at all.
func errUnusable(name, format string, a ...any) error {
	return &domain.Error{Kind: domain.Invalid, Msg: fmt.Sprintf("%s cannot be used: %s", name, fmt.Sprintf(format, a...))}
}

// Open reads a workbook, a csv file, a zip file of csv sheets, or a folder of csv sheets. It fails with Invalid for a file
// that is none of these, is cut short, or is larger than the limits.
func Open(path string) (*Book, error) {
	info, err := os.Stat(path)
	if err != nil {
		return nil, errUnusable(filepath.Base(path), "it is not there or may not be read")
	}
	if info.IsDir() {
		return openFolder(os.DirFS(path), filepath.Base(path))
	}
	if info.Size() > MaxFile {
		return nil, errUnusable(filepath.Base(path), "it has %d MiB, of at most %d", info.Size()>>20, MaxFile>>20)
	}
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, errUnusable(filepath.Base(path), "it may not be read")
	}
	return Read(filepath.Base(path), data)
}

// Read is Open of a file's content.
func Read(name string, data []byte) (*Book, error) {
	switch {
	case len(data) > MaxFile:
		return nil, errUnusable(name, "it has %d MiB, of at most %d", len(data)>>20, MaxFile>>20)
	case len(data) == 0:
		return nil, errUnusable(name, "it is empty")
	case bytes.HasPrefix(data, []byte("PK\x03\x04")):
		z, err := zip.NewReader(bytes.NewReader(data), int64(len(data)))
		if err != nil {
			return nil, errUnusable(name, "it is cut short or damaged")
		}
		for _, f := range z.File {
			if f.Name == "xl/workbook.xml" {
				return readWorkbook(name, data)
			}
		}
		return openFolder(z, name)
	case bytes.HasPrefix(data, []byte("\xd0\xcf\x11\xe0")):
		return nil, errUnusable(name, "it is a workbook of the old form or has a password; save it as xlsx without one")
	}
	rows, err := readCSV(data)
	if err != nil {
		return nil, errUnusable(name, "%s", err)
	}
	b := &Book{Name: name}
	b.add(strings.TrimSuffix(name, filepath.Ext(name)), rows)
	return b, nil
}

func readWorkbook(name string, data []byte) (*Book, error) {
	f, err := excelize.OpenReader(bytes.NewReader(data), excelize.Options{UnzipSizeLimit: maxUnpacked, UnzipXMLSizeLimit: maxPart, RawCellValue: true})
	if err != nil {
		return nil, errUnusable(name, "it is cut short, damaged, protected, or unpacks to more than %d MiB", maxUnpacked>>20)
	}
	defer f.Close() // removes the parts that were unpacked to disk; what is read is complete by then
	b := &Book{Name: name}
	for _, sheet := range f.GetSheetList() {
		rows, err := f.Rows(sheet)
		if err != nil {
			return nil, errUnusable(name, "its sheet %.60q is damaged", sheet)
		}
		var out [][]string
		for rows.Next() {
			if len(out) == maxRows {
				return nil, errors.Join(errUnusable(name, "its sheet %.60q has more than %d rows", sheet, maxRows), rows.Close())
			}
			cells, err := rows.Columns()
			if err != nil {
				return nil, errors.Join(errUnusable(name, "its sheet %.60q is damaged at row %d", sheet, len(out)+1), rows.Close())
			}
			out = append(out, clip(cells))
		}
		if err := errors.Join(rows.Error(), rows.Close()); err != nil {
			return nil, errUnusable(name, "its sheet %.60q is damaged", sheet)
		}
		b.add(sheet, out)
	}
	return b, nil
}

// clip bounds the cells of a row and takes blanks at their ends away: they are never meant, and break joins by name.
func clip(cells []string) []string {
	if len(cells) > maxColumns {
		cells = cells[:maxColumns]
	}
	for i, c := range cells {
		c = strings.TrimSpace(strings.ToValidUTF8(c, "\uFFFD"))
		if utf8.RuneCountInString(c) > maxCell {
			c = string([]rune(c)[:maxCell])
		}
		cells[i] = c
	}
	return cells
}

func readCSV(data []byte) ([][]string, error) {
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))
	if !utf8.Valid(data) {
		return nil, errors.New("it is not UTF-8 text")
	}
	if bytes.IndexByte(data, 0) >= 0 {
		return nil, errors.New("it is not text")
	}
	r := csv.NewReader(bytes.NewReader(data))
	r.FieldsPerRecord = -1
	r.LazyQuotes = true
	line := data
	if i := bytes.IndexByte(line, '\n'); i >= 0 {
		line = line[:i]
	}
	if bytes.Count(line, []byte(";")) > bytes.Count(line, []byte(",")) {
		r.Comma = ';'
	} else if bytes.Count(line, []byte("\t")) > bytes.Count(line, []byte(",")) {
		r.Comma = '\t'
	}
	var out [][]string
	for {
		rec, err := r.Read()
		if errors.Is(err, io.EOF) {
			return out, nil
		}
		if err != nil {
			return nil, fmt.Errorf("its line %d is no csv", len(out)+1)
		}
		if len(out) == maxRows {
			return nil, fmt.Errorf("it has more than %d rows", maxRows)
		}
		for i, c := range rec {
			rec[i] = strings.TrimPrefix(c, "'") // as our own csv disarms formulas
		}
		out = append(out, clip(rec))
	}
}

func openFolder(folder fs.FS, name string) (*Book, error) {
	paths, err := fs.Glob(folder, "*.csv")
	if err != nil || len(paths) == 0 {
		return nil, errUnusable(name, "it holds no workbook and no csv sheets")
	}
	slices.Sort(paths)
	b := &Book{Name: name}
	total := int64(0)
	for _, p := range paths {
		f, err := folder.Open(p)
		if err != nil {
			return nil, errUnusable(name, "its sheet %.60q may not be read", p)
		}
		data, err := io.ReadAll(io.LimitReader(f, maxPart+1))
		err = errors.Join(err, f.Close())
		if total += int64(len(data)); err != nil || len(data) > maxPart || total > maxUnpacked {
			return nil, errUnusable(name, "its sheet %.60q is damaged or has more than %d MiB", p, maxPart>>20)
		}
		rows, err := readCSV(data)
		if err != nil {
			return nil, errUnusable(name, "its sheet %.60q: %s", p, err)
		}
		b.add(strings.TrimSuffix(p, ".csv"), rows)
	}
	return b, nil
}

// A Cell is one that could not be taken as it stands: where it is, and what was expected.
type Cell struct {
	Sheet   string `json:"sheet"`
	Row     int    `json:"row"` // as a person counts: the header is row 1
	Column  string `json:"column"`
	Problem string `json:"problem"`
	refuses bool   // the row cannot be taken; otherwise the cell alone is left unknown
}

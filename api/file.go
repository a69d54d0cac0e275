package api

import (
	"bytes"
	"errors"
	"net/http"
	"strconv"
	"strings"
	"time"

	"lampward/domain"
	"lampward/domain/handover"
)

const (
	xlsxMedia = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"
	zipMedia  = "application/zip"

	// fileTimeout is how long a file may take to be read and stored.
	fileTimeout = 5 * time.Minute
)

// files are the operations that take records in from files and give them out.
func (s *Server) files() []route {
	in := []string{xlsxMedia, zipMedia, csvMedia}
	out := []string{xlsxMedia, zipMedia}
	return []route{
		{Method: http.MethodPost, Path: inBuilding + "/import", Op: "importFile", Right: plan, Scope: building, Takes: in, Body: handover.MaxFile, Timeout: fileTimeout, Handle: s.importFile},
		{Method: http.MethodPost, Path: inBuilding + "/import/bad_rows", Op: "listBadRows", Right: plan, Scope: building, Takes: in, Gives: out[:1], Body: handover.MaxFile,
			Timeout: fileTimeout, Handle: s.listBadRows},
		{Method: http.MethodGet, Path: inBuilding + "/export", Op: "exportBuilding", Right: read, Scope: building, Gives: out, Timeout: fileTimeout, Handle: s.exportBuilding},
		{Method: http.MethodGet, Path: "/v1/survey_template", Op: "surveyTemplate", Right: read, Scope: catalogue, Gives: out, Handle: s.surveyTemplate},
		{Method: http.MethodPost, Path: "/v1/column_matching", Op: "proposeMatching", Right: read, Scope: catalogue, Takes: in, Body: handover.MaxFile, Handle: s.proposeMatching},
		{Method: http.MethodPost, Path: "/v1/column_matching/keep", Op: "keepMatching", Right: plan, Scope: catalogue, Takes: []string{jsonMedia}, Handle: s.keepMatching},
	}
}

// book reads the body as a file.
func (c *call) book() (*handover.Book, []byte, error) {
	data, err := c.body()
	if err != nil {
		return nil, nil, err
	}
	name := map[string]string{xlsxMedia: "upload.xlsx", zipMedia: "upload.zip", csvMedia: "upload.csv"}[c.takesIn]
	b, err := handover.Read(name, data)
	return b, data, err
}

// parsed reads the body as a register; anybody's sheet is matched as was kept for its headers.
func (c *call) parsed() (*handover.Book, *handover.Register, []byte, error) {
	b, data, err := c.book()
	if err != nil {
		return nil, nil, nil, err
	}
	var m *handover.Matching
	if handover.FormOf(b) == handover.SheetForm {
		if m, _, err = handover.KeptMatching(c.ctx, c.s.opt.Pool, b); err != nil {
			return nil, nil, nil, err
		}
	}
	r, err := handover.Parse(b, m)
	return b, r, data, err
}

func (s *Server) importFile(c *call) (reply, error) {
	q, err := c.paged([]filter{{Name: "dry_run", Kind: boolFilter}, {Name: "good_rows", Kind: boolFilter}}, false)
	if err != nil {
		return reply{}, err
	}
	_, r, data, err := c.parsed()
	if err != nil {
		return reply{}, err
	}
	res, err := handover.Store(c.ctx, s.opt.Pool, r, handover.Options{By: c.principal.Actor, At: c.at, Building: c.building,
		DryRun: value[bool](q, "dry_run"), GoodRows: value[bool](q, "good_rows"), File: data})
	refusal := new(handover.Refusal)
	if errors.As(err, &refusal) {
		bad := &domain.Error{Kind: domain.Invalid, Msg: refusal.Error()}
		for _, cell := range refusal.Result.Cells {
			bad.Fields = append(bad.Fields, domain.Field{Pointer: "/" + pointed(cell.Sheet) + "/" + strconv.Itoa(cell.Row) + "/" + pointed(cell.Column), Detail: cell.Problem})
		}
		return reply{}, bad
	}
	return reply{body: res}, err
}

// pointed escapes one part of a JSON pointer (RFC 6901).
func pointed(part string) string {
	return strings.NewReplacer("~", "~0", "/", "~1").Replace(part)
}

func (s *Server) listBadRows(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	b, r, _, err := c.parsed()
	if err != nil {
		return reply{}, err
	}
	bad := r.BadRows(b)
	if len(bad) == 0 {
		return reply{}, domain.Invalidf("every row of this file can be taken")
	}
	return c.workbook(bad, "bad-rows")
}

// workbook answers sheets in the form that Accept chose.
func (c *call) workbook(tables []handover.Table, name string) (reply, error) {
	var out bytes.Buffer
	write, ending := handover.WriteXLSX, ".xlsx"
	if c.media == zipMedia {
		write, ending = handover.WriteCSV, ".zip"
	}
	if err := write(&out, tables); err != nil {
		return reply{}, err
	}
	return reply{raw: out.Bytes(), media: c.media, header: [][2]string{{"Content-Disposition", `attachment; filename="` + name + ending + `"`}}}, nil
}

func (s *Server) exportBuilding(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	cat, err := s.opt.Reviewer.Shelf.At(c.ctx, s.opt.Pool)
	if err != nil {
		return reply{}, err
	}
	tables, err := handover.Export(c.ctx, c.read(), cat)
	if err != nil {
		return reply{}, err
	}
	return c.workbook(tables, tables[0].Rows[0][0])
}

func (s *Server) surveyTemplate(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	return c.workbook(handover.Template(), "survey")
}

func (s *Server) proposeMatching(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	b, _, err := c.book()
	if err != nil {
		return reply{}, err
	}
	m, kept, err := handover.KeptMatching(c.ctx, s.opt.Pool, b)
	return reply{body: map[string]any{"matching": m, "kept": kept}}, err
}

func (s *Server) keepMatching(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	m, err := decode[handover.Matching](c)
	if err != nil {
		return reply{}, err
	}
	if m.Columns == nil {
		m.Columns = map[string]string{}
	}
	if m.Words == nil {
		m.Words = map[string]string{}
	}
	if err := handover.KeepMatching(c.ctx, s.opt.Pool, c.principal.Actor, c.at, &m); err != nil {
		return reply{}, err
	}
	return reply{body: m}, nil
}

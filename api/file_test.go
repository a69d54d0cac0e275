package api

import (
	"bytes"
	"strings"
	"testing"

	"lampward/domain/handover"
)

func TestFiles(t *testing.T) {
	t.Parallel()
	y := newLit(t)
	xlsx, zip, csv := "Content-Type: "+xlsxMedia, "Content-Type: "+zipMedia, "Content-Type: "+csvMedia
	book := y.Get(atA+"/export", "Accept: "+xlsxMedia).Want(200).Body
	sheets := y.Get(atA+"/export", "Accept: "+zipMedia).Want(200).Body
	y.Get(atA + "/export?x=1").Want(422)
	for media, data := range map[string][]byte{xlsx: book, zip: sheets} {
		got := y.Post(atA+"/import", data, media).Want(200).Object()
		if got["new"] != 0.0 || got["changed"] != 0.0 || got["unchanged"].(float64) != 5 {
			t.Errorf("in again: %v", got)
		}
	}
	template := y.Get("/v1/survey_template").Want(200)
	y.Get("/v1/survey_template?x=1").Want(422)
	y.Post(atA+"/import", template.Body, xlsx).Want(422)
	y.Post(atA+"/import", book[:len(book)/2], xlsx).Want(422)
	y.Post(atA+"/import?dry_run=perhaps", book, xlsx).Want(422)

	// A changed file: a dry run stores nothing, a bad row refuses all, good rows are taken and the bad ones given back.
	tables := func(change func(*handover.Table)) []byte {
		b, err := handover.Read("x.xlsx", book)
		if err != nil {
			t.Fatal(err)
		}
		var out []handover.Table
		for _, name := range b.Sheets() {
			rows := b.Rows(name)
			x := handover.Table{Name: name, Header: rows[0], Rows: rows[1:]}
			if name == "Fixtures" {
				change(&x)
			}
			out = append(out, x)
		}
		var w bytes.Buffer
		if err := handover.WriteXLSX(&w, out); err != nil {
			t.Fatal(err)
		}
		return w.Bytes()
	}
	set := func(x *handover.Table, row int, column, text string) {
		for i, h := range x.Header {
			if h == column {
				for len(x.Rows[row]) <= i {
					x.Rows[row] = append(x.Rows[row], "")
				}
				x.Rows[row][i] = text
			}
		}
	}
	changed := tables(func(x *handover.Table) { set(x, 0, "zone", "damp") })
	if got := y.Post(atA+"/import?dry_run=true", changed, xlsx).Want(200).Object(); got["changed"] != 1.0 || got["dry_run"] != true {
		t.Errorf("dry run: %v", got)
	}
	bad := tables(func(x *handover.Table) { set(x, 0, "zone", "damp"); set(x, 1, "lamp_count", "many") })
	refused := y.Post(atA+"/import", bad, xlsx).Want(422)
	if p := refused.Pointers(); len(p) != 1 || p[0] != "/Fixtures/3/lamp_count" {
		t.Errorf("refused at %v", p)
	}
	if got := y.Get(atA + "/fixtures/" + y.fixtures[0]).Want(200).Object(); got["zone"] != "dry" {
		t.Errorf("a refused file or a dry run changed a place: %v", got)
	}
	back := y.Post(atA+"/import/bad_rows", bad, xlsx).Want(200)
	if b, err := handover.Read("bad.xlsx", back.Body); err != nil || len(b.Rows("Fixtures")) != 2 {
		t.Errorf("bad rows: %v", err)
	}
	y.Post(atA+"/import/bad_rows", book, xlsx).Want(422)
	y.Post(atA+"/import/bad_rows?x=1", book, xlsx).Want(422)
	if got := y.Post(atA+"/import?good_rows=true", bad, xlsx).Want(200).Object(); got["changed"] != 1.0 || got["refused"] != 1.0 {
		t.Errorf("good rows: %v", got)
	}

	// Anybody's sheet: proposed, corrected, kept, taken.
	text := "Room,Fitting,Lamp,Qty,Owner\nHall,Batten,2x58 W T8,3,me\n"
	proposed := y.Post("/v1/column_matching", text, csv).Want(200).Object()
	m := proposed["matching"].(map[string]any)
	if proposed["kept"] != false || m["columns"].(map[string]any)["Qty"] != "quantity" {
		t.Errorf("proposed %v", proposed)
	}
	m["columns"].(map[string]any)["Owner"] = "ignore"
	y.Post("/v1/column_matching/keep", m).Want(200)
	if again := y.Post("/v1/column_matching", text, csv).Want(200).Object(); again["kept"] != true {
		t.Errorf("kept %v", again)
	}
	m["columns"].(map[string]any)["Owner"] = "proprietor"
	y.Post("/v1/column_matching/keep", m).Want(422)
	y.Post("/v1/column_matching/keep?x=1", m).Want(422)
	y.Post("/v1/column_matching?x=1", text, csv).Want(422)
	y.Post("/v1/column_matching", "a\n", csv).Want(422)
	if got := y.Post(atA+"/import", text, csv).Want(200).Object(); got["new"] != 4.0 || got["models_new"] != 2.0 {
		t.Errorf("anybody's sheet: %v", got)
	}
	if hits := y.Get(atA + "/fixtures?limit=1000").Want(200); strings.Contains(string(hits.Body), "Owner") {
		t.Error("an ignored column is in a note")
	}
}

package domain

import (
	"context"
	"errors"
	"fmt"
	"reflect"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"
)

// Row is the head of every building row.
type Row struct {
	BuildingID ID         `json:"building_id"`
	ID         ID         `json:"id"`
	Version    int64      `json:"version"`
	CreatedAt  time.Time  `json:"created_at"`
	UpdatedAt  time.Time  `json:"updated_at"`
	RetiredAt  *time.Time `json:"retired_at,omitempty"`
}

// Head returns the row's head, so that code for any table can reach it.
func (r *Row) Head() *Row { return r }

// CatalogueRow is the head of every catalogue row: shared by all buildings.
type CatalogueRow struct {
	ID        ID         `json:"id"`
	Version   int64      `json:"version"`
	CreatedAt time.Time  `json:"created_at"`
	UpdatedAt time.Time  `json:"updated_at"`
	RetiredAt *time.Time `json:"retired_at,omitempty"`
}

// CatalogueHead returns the row's head.
func (r *CatalogueRow) CatalogueHead() *CatalogueRow { return r }

// Table maps T to a table whose columns have the names of T's JSON fields. A statement made by it always lists its
// columns, so a column added by a later release does no harm to an earlier one.
type Table[T any] struct {
	Name       string // in SQL
	What       string // in words
	columns    []column
	byName     map[string]int
	list       string // every column
	scoped     bool
	updateSQL  string
	updateArgs []int // columns, by position
}

type column struct {
	name    string
	path    []int
	private bool // not shown to clients
}

// NewTable describes the table name, called what in messages. T is a struct; a column is named by the field's `db`
// tag, else by its JSON name; fields with `db:"-"` or with neither are not columns. Rows of a table with a
// building_id column are always asked for by building.
func NewTable[T any](name, what string) *Table[T] {
	t := &Table[T]{Name: name, What: what, byName: map[string]int{}}
	t.add(reflect.TypeFor[T](), nil)
	_, t.scoped = t.byName["building_id"]
	t.list = strings.Join(t.Columns(), ", ")
	t.prepareUpdate()
	return t
}

// NewEstateTable describes a table of the estate: its rows may point to a building by value but are not a building's.
func NewEstateTable[T any](name, what string) *Table[T] {
	t := NewTable[T](name, what)
	t.scoped = false
	t.prepareUpdate()
	return t
}

func (t *Table[T]) add(typ reflect.Type, path []int) {
	for i := range typ.NumField() {
		f := typ.Field(i)
		at := append(append([]int{}, path...), i)
		name, _, _ := strings.Cut(f.Tag.Get("json"), ",")
		if f.Anonymous && name == "" {
			t.add(f.Type, at)
			continue
		}
		private := name == "-"
		if db := f.Tag.Get("db"); db != "" {
			name = db
		}
		if name == "-" || name == "" {
			continue
		}
		if _, ok := t.byName[name]; ok {
			panic("domain: column " + name + " twice in " + t.Name)
		}
		t.byName[name] = len(t.columns)
		t.columns = append(t.columns, column{name, at, private})
	}
}

// Columns returns the column names in order.
func (t *Table[T]) Columns() []string {
	names := make([]string, len(t.columns))
	for i, c := range t.columns {
		names[i] = c.name
	}
	return names
}

// List returns the column list for a SELECT, each with the alias's prefix if one is given.
func (t *Table[T]) List(alias string) string {
	if alias == "" {
		return t.list
	}
	return alias + "." + strings.Join(t.Columns(), ", "+alias+".")
}

// Values returns row's values in the order of the columns.
func (t *Table[T]) Values(row *T) []any {
	v := reflect.ValueOf(row).Elem()
	out := make([]any, len(t.columns))
	for i, c := range t.columns {
		out[i] = v.FieldByIndex(c.path).Interface()
	}
	return out
}

// Targets returns pointers to row's fields in the order of the columns, for Scan.
func (t *Table[T]) Targets(row *T) []any {
	v := reflect.ValueOf(row).Elem()
	out := make([]any, len(t.columns))
	for i, c := range t.columns {
		out[i] = v.FieldByIndex(c.path).Addr().Interface()
	}
	return out
}

// Scan reads rows to the end and calls each with every row; a row is valid during the call only.
func (t *Table[T]) Scan(rows pgx.Rows, each func(*T) error) error {
	defer rows.Close()
	var row T
	targets := t.Targets(&row)
	for rows.Next() {
		row = *new(T)
		if err := rows.Scan(targets...); err != nil {
			return fmt.Errorf("%s: %w", t.Name, err)
		}
		if err := each(&row); err != nil {
			return err
		}
	}
	return Classify(rows.Err(), t.What)
}

// Each runs "SELECT columns FROM table <rest>" and calls each with every row. On a building table rest must say
// WHERE building_id = $1 and s.Building must be the first argument.
func (t *Table[T]) Each(ctx context.Context, s Scope, each func(*T) error, rest string, args ...any) error {
	rows, err := s.Query(ctx, "SELECT "+t.List("")+" FROM "+t.Name+" "+rest, args...)
	if err != nil {
		return Classify(err, t.What)
	}
	return t.Scan(rows, each)
}

// Select is Each gathered in a slice, never nil.
func (t *Table[T]) Select(ctx context.Context, s Scope, rest string, args ...any) ([]T, error) {
	out := []T{}
	err := t.Each(ctx, s, func(row *T) error { out = append(out, *row); return nil }, rest, args...)
	return out, err
}

// One is Select of exactly one row; it fails with NotFound where there is none.
func (t *Table[T]) One(ctx context.Context, s Scope, rest string, args ...any) (T, error) {
	var row T
	err := s.QueryRow(ctx, "SELECT "+t.List("")+" FROM "+t.Name+" "+rest, args...).Scan(t.Targets(&row)...)
	return row, Classify(err, t.What)
}

// Get returns the row with the given id, of s's building where the table belongs to buildings.
func (t *Table[T]) Get(ctx context.Context, s Scope, id ID) (T, error) {
	if t.scoped {
		return t.One(ctx, s, "WHERE building_id = $1 AND id = $2", s.Building, id)
	}
	return t.One(ctx, s, "WHERE id = $1", id)
}

// Lock is Get that holds the row against other writers until the transaction ends.
func (t *Table[T]) Lock(ctx context.Context, s Scope, id ID) (T, error) {
	if t.scoped {
		return t.One(ctx, s, "WHERE building_id = $1 AND id = $2 FOR NO KEY UPDATE", s.Building, id)
	}
	return t.One(ctx, s, "WHERE id = $1 FOR NO KEY UPDATE", id)
}

// Insert stores row as it stands.
func (t *Table[T]) Insert(ctx context.Context, s Scope, row *T) error {
	marks := make([]string, len(t.columns))
	for i := range marks {
		marks[i] = fmt.Sprintf("$%d", i+1)
	}
	_, err := s.Exec(ctx, "INSERT INTO "+t.Name+" ("+t.List("")+") VALUES ("+strings.Join(marks, ", ")+")", t.Values(row)...)
	return Classify(err, t.What)
}

// Copy stores many new rows at once; row returns nil after the last.
func (t *Table[T]) Copy(ctx context.Context, s Scope, n int, row func(i int) *T) error {
	_, err := s.CopyFrom(ctx, pgx.Identifier{t.Name}, t.Columns(), pgx.CopyFromSlice(n, func(i int) ([]any, error) {
		return t.Values(row(i)), nil
	}))
	return Classify(err, t.What)
}

// prepareUpdate writes the statement that Update runs, and which columns its arguments are. An update never sets what
// says which row it is, nor when it was made.
func (t *Table[T]) prepareUpdate() {
	t.updateArgs = nil
	var set []string
	where := "true"
	for i, c := range t.columns {
		n := len(t.updateArgs) + 1
		switch {
		case c.name == "created_at":
			continue
		case c.name == "version":
			set = append(set, "version = version + 1")
			where += fmt.Sprintf(" AND version = $%d", n)
		case c.name == "id", c.name == "building_id" && t.scoped:
			where += fmt.Sprintf(" AND %s = $%d", c.name, n)
		default:
			set = append(set, fmt.Sprintf("%s = $%d", c.name, n))
		}
		t.updateArgs = append(t.updateArgs, i)
	}
	t.updateSQL = "UPDATE " + t.Name + " SET " + strings.Join(set, ", ") + " WHERE " + where + " RETURNING version"
}

func (t *Table[T]) updateValues(row *T) []any {
	all := t.Values(row)
	out := make([]any, len(t.updateArgs))
	for i, n := range t.updateArgs {
		out[i] = all[n]
	}
	return out
}

// Update stores row if the stored version is still row's, and raises row's version. It fails with Stale if somebody
// else changed it first and with NotFound if there is none.
func (t *Table[T]) Update(ctx context.Context, s Scope, row *T) error {
	v := reflect.ValueOf(row).Elem()
	version := v.FieldByIndex(t.columns[t.byName["version"]].path).Addr().Interface().(*int64)
	err := s.QueryRow(ctx, t.updateSQL, t.updateValues(row)...).Scan(version)
	if !errors.Is(err, pgx.ErrNoRows) {
		return Classify(err, t.What)
	}
	if _, err := t.Get(ctx, s, v.FieldByIndex(t.columns[t.byName["id"]].path).Interface().(ID)); err != nil {
		return err
	}
	return &Error{Kind: Stale, Msg: t.What + " was changed by someone else; read it again"}
}

// UpdateAll is Update of many rows in one round trip.
func (t *Table[T]) UpdateAll(ctx context.Context, s Scope, rows []*T) error {
	if len(rows) == 0 {
		return nil
	}
	var batch pgx.Batch
	for _, row := range rows {
		version := t.Targets(row)[t.byName["version"]]
		batch.Queue(t.updateSQL, t.updateValues(row)...).QueryRow(func(r pgx.Row) error { return r.Scan(version) })
	}
	err := s.SendBatch(ctx, &batch).Close()
	if errors.Is(err, pgx.ErrNoRows) {
		return &Error{Kind: Stale, Msg: t.What + " was changed by someone else; read it again"}
	}
	return Classify(err, t.What)
}

// Same reports whether two rows agree in everything a client may set, and are of one kind: kinds of place share a table.
func (t *Table[T]) Same(a, b *T) bool {
	va, vb := t.Values(a), t.Values(b)
	for i, c := range t.columns {
		switch c.name {
		case "version", "created_at", "updated_at", "retired_at":
			continue
		}
		if c.private && c.name != "kind" {
			continue
		}
		if !alike(va[i], vb[i]) {
			return false
		}
	}
	return true
}

// alike compares two values; times are compared as instants at the database's precision.
func alike(a, b any) bool {
	switch x := a.(type) {
	case *time.Time:
		y := b.(*time.Time)
		return x == nil && y == nil || x != nil && y != nil && x.Truncate(time.Microsecond).Equal(y.Truncate(time.Microsecond))
	case time.Time:
		return x.Truncate(time.Microsecond).Equal(b.(time.Time).Truncate(time.Microsecond))
	}
	return reflect.DeepEqual(a, b)
}

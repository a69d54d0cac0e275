package domain

import (
	"context"
	"fmt"
	"slices"
	"strings"
)

// A Match narrows a list to rows whose column equals Value, or is absent where Value is nil. Op "contains" matches
// text that holds Value in any case; "from" and "until" compare; "in" takes a list of identifiers; "named"
// is for a column of other codes: Value is the code or one of those.
type Match struct {
	Column string
	Op     string // empty: equals
	Value  any
}

// Where turns matches into a condition whose first argument has number from. It fails with Invalid for a column the
// table does not have.
func (t *Table[T]) Where(from int, matches []Match) (string, []any, error) {
	var parts []string
	var args []any
	for _, m := range matches {
		if _, ok := t.byName[m.Column]; !ok {
			return "", nil, Invalidf("%s has no field %s", t.What, m.Column)
		}
		n := from + len(args)
		switch {
		case m.Value == nil:
			parts = append(parts, m.Column+" IS NULL")
			continue
		case m.Op == "contains":
			text := strings.NewReplacer(`\`, `\\`, `%`, `\%`, `_`, `\_`).Replace(fmt.Sprint(m.Value))
			parts, args = append(parts, fmt.Sprintf("%s ILIKE '%%' || $%d || '%%'", m.Column, n)), append(args, text)
			continue
		case m.Op == "absent": // Value is whether the column is absent
			parts = append(parts, fmt.Sprintf("(%s IS NULL) = $%d", m.Column, n))
		case m.Op == "in":
			parts = append(parts, fmt.Sprintf("%s = ANY($%d)", m.Column, n))
		case m.Op == "named":
			parts = append(parts, fmt.Sprintf("(code = $%d OR $%d = ANY(%s))", n, n, m.Column))
		case m.Op == "from":
			parts = append(parts, fmt.Sprintf("%s >= $%d", m.Column, n))
		case m.Op == "until":
			parts = append(parts, fmt.Sprintf("%s < $%d", m.Column, n))
		default:
			parts = append(parts, fmt.Sprintf("%s = $%d", m.Column, n))
		}
		args = append(args, m.Value)
	}
	return strings.Join(parts, " AND "), args, nil
}

// query builds the SELECT of a list in the order of ids.
func (t *Table[T]) query(s Scope, after ID, limit int, matches []Match) (string, []any, error) {
	rest, args := "WHERE id > $1", []any{after}
	if t.scoped {
		rest, args = "WHERE building_id = $1 AND id > $2", []any{s.Building, after}
	}
	cond, more, err := t.Where(len(args)+1, matches)
	if err != nil {
		return "", nil, err
	}
	if cond != "" {
		rest += " AND " + cond
	}
	rest += " ORDER BY id"
	args = append(args, more...)
	if limit > 0 {
		args = append(args, limit)
		rest += fmt.Sprintf(" LIMIT $%d", len(args))
	}
	return rest, args, nil
}

// Page lists at most page.Limit rows in the order of their ids, and the cursor of the next page, empty at the end.
func (t *Table[T]) Page(ctx context.Context, s Scope, page Page, matches ...Match) ([]T, string, error) {
	var after ID
	if page.Cursor != "" {
		if err := DecodeCursor(page.Cursor, &after); err != nil {
			return nil, "", err
		}
	}
	limit := page.Rows()
	rest, args, err := t.query(s, after, limit+1, matches)
	if err != nil {
		return nil, "", err
	}
	rows, err := t.Select(ctx, s, rest, args...)
	if err != nil || len(rows) <= limit {
		return rows, "", err
	}
	rows = slices.Clip(rows[:limit])
	return rows, EncodeCursor(t.idOf(&rows[limit-1])), nil
}

// Stream calls each with every matching row in the order of ids without holding them all; a row is valid during the
// call only.
func (t *Table[T]) Stream(ctx context.Context, s Scope, each func(*T) error, matches ...Match) error {
	rest, args, err := t.query(s, ID{}, 0, matches)
	if err != nil {
		return err
	}
	return t.Each(ctx, s, each, rest, args...)
}

func (t *Table[T]) idOf(row *T) ID { return *t.Targets(row)[t.byName["id"]].(*ID) }

// Has reports whether the table has a column of this name.
func (t *Table[T]) Has(column string) bool { _, ok := t.byName[column]; return ok }

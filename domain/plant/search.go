package plant

import (
	"context"
	"strings"

	"github.com/jackc/pgx/v5"

	"lampward/domain"
)

// A Hit is a record found by what is written on it.
type Hit struct {
	Kind  string    `json:"kind"` // space, circuit, dimmer, driver, fixture
	ID    domain.ID `json:"id"`
	Label string    `json:"label"`
	Space string    `json:"space,omitempty"`
}

const mostHits = 50

// Search finds records in use by a part of a label, of the name of a space, or of board/way, whatever the case of the
// letters: those that begin with it first, at most 50.
func Search(ctx context.Context, s domain.Scope, text string) ([]Hit, error) {
	text = strings.NewReplacer(`\`, `\\`, `%`, `\%`, `_`, `\_`).Replace(text)
	rows, err := s.Query(ctx, `
		SELECT kind, id, label, space
		  FROM (SELECT p.kind, p.id, p.tag AS label, coalesce(s.name, '') AS space
		          FROM place p
		          LEFT JOIN space s ON s.building_id = p.building_id AND s.id = p.space_id
		         WHERE p.building_id = $1 AND p.retired_at IS NULL AND p.tag ILIKE '%' || $2 || '%'
		         UNION ALL
		        SELECT 'circuit', id, board || '/' || way, ''
		          FROM circuit
		         WHERE building_id = $1 AND retired_at IS NULL AND board || '/' || way ILIKE '%' || $2 || '%'
		         UNION ALL
		        SELECT 'space', id, name, level
		          FROM space
		         WHERE building_id = $1 AND retired_at IS NULL AND name ILIKE '%' || $2 || '%') AS found
		 ORDER BY NOT label ILIKE $2 || '%', length(label), label, id
		 LIMIT $3`, s.Building, text, mostHits)
	if err != nil {
		return nil, domain.Classify(err, "record")
	}
	out, err := pgx.CollectRows(rows, func(row pgx.CollectableRow) (h Hit, err error) {
		return h, row.Scan(&h.Kind, &h.ID, &h.Label, &h.Space)
	})
	if out == nil {
		out = []Hit{}
	}
	return out, domain.Classify(err, "record")
}

package plant

import (
	"context"

	"github.com/jackc/pgx/v5"

	"lampward/domain"
)

// A Use is a place that carries a model.
type Use struct {
	BuildingID   domain.ID `json:"building_id"`
	BuildingCode string    `json:"building_code"`
	PlaceID      domain.ID `json:"place_id"`
	Kind         string    `json:"kind"` // dimmer, driver, fixture
	Tag          string    `json:"tag"`
	Space        string    `json:"space,omitempty"`
}

// Uses lists places that carry a model under any of its ids, odd lamps included, in the buildings named (in all where
// buildings is nil): at most page.Rows() of them, in the order of buildings and places.
func Uses(ctx context.Context, db domain.Queryer, kind string, ids []domain.ID, buildings []domain.ID, page domain.Page) ([]Use, string, error) {
	column, ok := map[string]string{KindLamp: "lamp_model_id", KindDriver: "driver_model_id", KindDimmer: "dimmer_model_id", KindFixture: "fixture_model_id"}[kind]
	if !ok {
		return nil, "", domain.Invalidf("%q is no kind of model", kind)
	}
	var building, place domain.ID
	if page.Cursor != "" {
		if err := domain.DecodeCursor(page.Cursor, &building, &place); err != nil {
			return nil, "", err
		}
	}
	var only any
	if buildings != nil {
		only = domain.IDs(buildings)
	}
	rows, err := db.Query(ctx, `
		SELECT p.building_id, b.code, p.id, p.kind, p.tag, coalesce(s.name, '')
		  FROM place p
		  JOIN building b ON b.id = p.building_id
		  LEFT JOIN space s ON s.building_id = p.building_id AND s.id = p.space_id
		 WHERE p.retired_at IS NULL
		   AND ($2::uuid[] IS NULL OR p.building_id = ANY($2))
		   AND (p.building_id, p.id) > ($3, $4)
		   AND (p.`+column+` = ANY($1)
		     OR EXISTS (SELECT FROM unit u
		                 WHERE u.building_id = p.building_id AND u.place_id = p.id AND u.`+column+` = ANY($1)
		                   AND u.removed_at IS NULL AND u.retired_at IS NULL))
		 ORDER BY p.building_id, p.id
		 LIMIT $5`, domain.IDs(ids), only, building, place, page.Rows()+1)
	if err != nil {
		return nil, "", domain.Classify(err, "place")
	}
	out, err := pgx.CollectRows(rows, func(row pgx.CollectableRow) (u Use, err error) {
		return u, row.Scan(&u.BuildingID, &u.BuildingCode, &u.PlaceID, &u.Kind, &u.Tag, &u.Space)
	})
	if err != nil {
		return nil, "", domain.Classify(err, "place")
	}
	if len(out) > page.Rows() {
		out = out[:page.Rows()]
		last := out[len(out)-1]
		return out, domain.EncodeCursor(last.BuildingID, last.PlaceID), nil
	}
	return out, "", nil
}

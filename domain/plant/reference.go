package plant

import (
	"context"
	"fmt"

	"github.com/jackc/pgx/v5"

	"lampward/domain"
)

// references gathers the identifiers that records name, so that one question to the database tells which do not
// exist, each with its own pointer.
type references struct {
	named []reference
	known map[string]map[domain.ID]bool // made in the same request
	kept  map[reference]bool            // named by the stored record already
}

type reference struct {
	pointer, table string
	id             domain.ID
}

// name notes that the field at pointer names a row of table; a nil id names nothing.
func (r *references) name(pointer, table string, id *domain.ID) {
	if id != nil {
		r.named = append(r.named, reference{pointer, table, *id})
	}
}

// made tells that the same request makes a row.
func (r *references) made(table string, id domain.ID) {
	if r.known == nil {
		r.known = map[string]map[domain.ID]bool{}
	}
	if r.known[table] == nil {
		r.known[table] = map[domain.ID]bool{}
	}
	r.known[table][id] = true
}

// keep tells that the stored record at a pointer names what it names: leaving that as it is asks nothing, even where
// it went out of use meanwhile, as a make-up may whose places stay.
func (r *references) keep(stored any, at string) {
	row, ok := stored.(refers)
	if !ok {
		return
	}
	var was references
	row.refer(&was, at)
	if r.kept == nil {
		r.kept = map[reference]bool{}
	}
	for _, n := range was.named {
		r.kept[n] = true
	}
}

// referenceSQL finds which of some identifiers exist; building tables are asked with the building.
var referenceSQL = map[string]string{
	"space":         `SELECT id FROM space WHERE building_id = $1 AND id = ANY($2) AND retired_at IS NULL`,
	"make_up":       `SELECT id FROM make_up WHERE building_id = $1 AND id = ANY($2) AND retired_at IS NULL`,
	"circuit":       `SELECT id FROM circuit WHERE building_id = $1 AND id = ANY($2) AND retired_at IS NULL`,
	"place":         `SELECT id FROM place WHERE building_id = $1 AND id = ANY($2) AND retired_at IS NULL`,
	"dimmer":        `SELECT id FROM place WHERE building_id = $1 AND id = ANY($2) AND retired_at IS NULL AND kind = 'dimmer'`,
	"lamp_model":    `SELECT id FROM lamp_model WHERE $1::uuid IS NOT NULL AND id = ANY($2)`,
	"driver_model":  `SELECT id FROM driver_model WHERE $1::uuid IS NOT NULL AND id = ANY($2)`,
	"dimmer_model":  `SELECT id FROM dimmer_model WHERE $1::uuid IS NOT NULL AND id = ANY($2)`,
	"fixture_model": `SELECT id FROM fixture_model WHERE $1::uuid IS NOT NULL AND id = ANY($2)`,
}

// check adds to c every reference that leads nowhere.
func (r *references) check(ctx context.Context, s domain.Scope, c *domain.Check) error {
	ask := map[string]map[domain.ID]bool{}
	for _, n := range r.named {
		if r.known[n.table][n.id] || r.kept[n] {
			continue
		}
		if ask[n.table] == nil {
			ask[n.table] = map[domain.ID]bool{}
		}
		ask[n.table][n.id] = true
	}
	var batch pgx.Batch
	found := map[string]map[domain.ID]bool{}
	for table, ids := range ask {
		list := make([]domain.ID, 0, len(ids))
		for id := range ids {
			list = append(list, id)
		}
		found[table] = map[domain.ID]bool{}
		batch.Queue(referenceSQL[table], s.Building, domain.IDs(list)).Query(func(rows pgx.Rows) error {
			for rows.Next() {
				var id domain.ID
				if err := rows.Scan(&id); err != nil {
					return err
				}
				found[table][id] = true
			}
			return rows.Err()
		})
	}
	if batch.Len() > 0 {
		if err := s.SendBatch(ctx, &batch).Close(); err != nil {
			return domain.Classify(err, "reference")
		}
	}
	for _, n := range r.named {
		if !r.known[n.table][n.id] && !r.kept[n] && !found[n.table][n.id] {
			c.Add(n.pointer, "names no %s that is in use here", words[n.table])
		}
	}
	return nil
}

var words = map[string]string{"space": "space", "make_up": "make-up", "circuit": "circuit", "place": "place", "dimmer": "dimmer",
	"lamp_model": "lamp model", "driver_model": "driver model", "dimmer_model": "dimmer model", "fixture_model": "fixture model"}

// refers is a record that names others.
type refers interface {
	refer(r *references, at string)
}

func (k *Circuit) refer(r *references, at string) { r.name(at+"/space_id", "space", k.SpaceID) }

func (h *PlaceHead) referHead(r *references, at string) {
	r.name(at+"/space_id", "space", h.SpaceID)
	r.name(at+"/make_up_id", "make_up", h.MakeUpID)
	r.name(at+"/fed_by_circuit_id", "circuit", h.FedByCircuitID)
	r.name(at+"/fed_by_place_id", "place", h.FedByPlaceID)
}

func (d *Dimmer) refer(r *references, at string) {
	d.referHead(r, at)
	r.name(at+"/dimmer_model_id", "dimmer_model", d.DimmerModelID)
}

func (d *Driver) refer(r *references, at string) {
	d.referHead(r, at)
	r.name(at+"/driver_model_id", "driver_model", d.DriverModelID)
}

func (f *Fixture) refer(r *references, at string) {
	f.referHead(r, at)
	r.name(at+"/fixture_model_id", "fixture_model", f.FixtureModelID)
	r.name(at+"/driver_model_id", "driver_model", f.DriverModelID)
	r.name(at+"/lamp_model_id", "lamp_model", f.LampModelID)
}

func (f *Feed) refer(r *references, at string) {
	r.name(at+"/place_id", "place", &f.PlaceID)
	r.name(at+"/from_circuit_id", "circuit", f.FromCircuitID)
	r.name(at+"/from_place_id", "place", f.FromPlaceID)
}

func (l *ControlLink) refer(r *references, at string) {
	r.name(at+"/dimmer_id", "dimmer", &l.DimmerID)
	r.name(at+"/place_id", "place", l.PlaceID)
	r.name(at+"/circuit_id", "circuit", l.CircuitID)
}

func (f *Failure) refer(r *references, at string) { r.name(at+"/make_up_id", "make_up", f.MakeUpID) }

func (m *MakeUp) refer(r *references, at string) {
	r.name(at+"/fixture_model_id", "fixture_model", m.FixtureModelID)
	r.name(at+"/lamp_model_id", "lamp_model", m.LampModelID)
	r.name(at+"/driver_model_id", "driver_model", m.DriverModelID)
	r.name(at+"/dimmer_model_id", "dimmer_model", m.DimmerModelID)
}

// checkReferences fails with Invalid where a record names something that does not exist or is out of use, unless the
// record as it was before (nil: none) names it too.
func checkReferences(ctx context.Context, s domain.Scope, what string, row, before any) error {
	named, ok := row.(refers)
	if !ok {
		return nil
	}
	var r references
	named.refer(&r, "")
	r.keep(before, "")
	c := domain.NewCheck(what)
	if err := r.check(ctx, s, c); err != nil {
		return err
	}
	return c.Err()
}

// pointer names a row of a list in a request.
func pointer(list string, i int) string { return fmt.Sprintf("/%s/%d", list, i) }

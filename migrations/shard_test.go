package migrations_test

import (
	"context"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/jackc/pgx/v5"

	"lampward/domain/domaintest"
)

// Which table is which: a table that is on none of the three lists fails the test.
var (
	reference = []string{"building", "catalogue_head", "dimmer_model", "driver_model", "fixture_model", "lamp_model", "pairing", "price", "space_use"}
	spread    = []string{"audit", "building_head", "building_rate", "building_total", "circuit", "control", "emergency_test", "event",
		"failure", "feed", "finding", "make_up", "place", "question", "space", "tree", "trip", "unit", "waiver"}
	local = []string{"access_grant", "api_key", "audit_central", "central_head", "column_match", "event_central", "idempotency", "import_run",
		"person", "review_due", "schema_migrations"}
)

func kind(table string) string {
	switch {
	case slices.Contains(reference, table):
		return "reference"
	case slices.Contains(spread, table):
		return "distributed"
	case slices.Contains(local, table), strings.HasPrefix(table, "river_"):
		return "local"
	}
	return ""
}

func strs(t *testing.T, sql string) [][]string {
	t.Helper()
	rows, err := domaintest.DB(t).Query(context.Background(), sql)
	if err != nil {
		t.Fatal(err)
	}
	out, err := pgx.CollectRows(rows, func(row pgx.CollectableRow) ([]string, error) {
		values, err := row.Values()
		if err != nil {
			return nil, err
		}
		line := make([]string, len(values))
		for i, v := range values {
			line[i], _ = v.(string)
		}
		return line, nil
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// The rules that let one schema run on a plain server and on a sharded one, read from the database's own catalogue.
func TestSchema(t *testing.T) {
	t.Parallel()
	t.Run("every table is on one list", func(t *testing.T) {
		seen := map[string]bool{}
		for _, row := range strs(t, `SELECT relname::text FROM pg_class WHERE relkind IN ('r', 'p') AND relnamespace = 'public'::regnamespace`) {
			seen[row[0]] = true
			if kind(row[0]) == "" {
				t.Errorf("table %s is on none of the lists", row[0])
			}
		}
		for _, name := range slices.Concat(reference, spread, local) {
			if !seen[name] && name != "schema_migrations" {
				t.Errorf("listed table %s does not exist", name)
			}
		}
	})
	t.Run("keys of building tables lead with the building", func(t *testing.T) {
		for _, row := range strs(t, `
			SELECT c.relname::text, i.relname::text, a.attname::text
			  FROM pg_index x
			  JOIN pg_class c ON c.oid = x.indrelid
			  JOIN pg_class i ON i.oid = x.indexrelid
			  JOIN pg_attribute a ON a.attrelid = c.oid AND a.attnum = x.indkey[0]
			 WHERE x.indisunique AND c.relnamespace = 'public'::regnamespace`) {
			if kind(row[0]) == "distributed" && row[2] != "building_id" {
				t.Errorf("unique index %s of %s leads with %s", row[1], row[0], row[2])
			}
		}
		for _, row := range strs(t, `
			SELECT table_name::text, data_type::text, is_nullable::text
			  FROM information_schema.columns
			 WHERE table_schema = 'public' AND column_name = 'building_id'`) {
			if kind(row[0]) == "distributed" && (row[1] != "uuid" || row[2] != "NO") {
				t.Errorf("%s.building_id is %s, nullable %s", row[0], row[1], row[2])
			}
		}
	})
	t.Run("foreign keys stay on one shard", func(t *testing.T) {
		for _, row := range strs(t, `
			SELECT k.conname::text, c.relname::text, f.relname::text, pg_get_constraintdef(k.oid), k.confdeltype::text
			  FROM pg_constraint k
			  JOIN pg_class c ON c.oid = k.conrelid
			  JOIN pg_class f ON f.oid = k.confrelid
			 WHERE k.contype = 'f' AND c.relnamespace = 'public'::regnamespace AND c.relname NOT LIKE 'river_%'`) {
			name, from, to, def, onDelete := row[0], kind(row[1]), kind(row[2]), row[3], row[4]
			switch {
			case from == "distributed" && to == "distributed":
				if !strings.Contains(def, "FOREIGN KEY (building_id,") || !strings.Contains(def, "(building_id, id)") {
					t.Errorf("%s does not pair building_id: %s", name, def)
				}
			case from == "distributed" && to == "reference", from == "reference" && to == "reference", from == "local" && to == "local":
			case from == "local" && row[2] != "building" && to == "reference":
			default:
				t.Errorf("%s leads from a %s table to a %s one: %s", name, from, to, def)
			}
			if onDelete == "n" || onDelete == "d" {
				t.Errorf("%s sets columns when the other row goes: %s", name, def)
			}
		}
	})
	t.Run("no triggers, rules, sequences, generated or unlogged tables", func(t *testing.T) {
		for _, row := range strs(t, `
			SELECT 'trigger ' || tgname, c.relname::text FROM pg_trigger g JOIN pg_class c ON c.oid = g.tgrelid
			 WHERE NOT tgisinternal AND c.relnamespace = 'public'::regnamespace
			 UNION ALL
			SELECT 'rule ' || rulename, c.relname::text FROM pg_rewrite r JOIN pg_class c ON c.oid = r.ev_class
			 WHERE c.relkind = 'r' AND c.relnamespace = 'public'::regnamespace
			 UNION ALL
			SELECT 'default ' || pg_get_expr(d.adbin, d.adrelid), c.relname::text FROM pg_attrdef d JOIN pg_class c ON c.oid = d.adrelid
			 WHERE c.relnamespace = 'public'::regnamespace AND pg_get_expr(d.adbin, d.adrelid) ~ 'nextval|random|now|timestamp'
			 UNION ALL
			SELECT 'identity or generated ' || a.attname, c.relname::text FROM pg_attribute a JOIN pg_class c ON c.oid = a.attrelid
			 WHERE (a.attidentity <> '' OR a.attgenerated <> '') AND c.relnamespace = 'public'::regnamespace
			 UNION ALL
			SELECT 'unlogged', relname::text FROM pg_class WHERE relpersistence = 'u' AND relnamespace = 'public'::regnamespace`) {
			if kind(row[1]) != "local" {
				t.Errorf("%s has a %s", row[1], row[0])
			}
		}
	})
	t.Run("names are short and explicit", func(t *testing.T) {
		for _, row := range strs(t, `
			SELECT conname::text, c.relname::text FROM pg_constraint k JOIN pg_class c ON c.oid = k.conrelid WHERE c.relnamespace = 'public'::regnamespace
			 UNION ALL
			SELECT i.relname::text, c.relname::text FROM pg_index x JOIN pg_class i ON i.oid = x.indexrelid JOIN pg_class c ON c.oid = x.indrelid
			 WHERE c.relnamespace = 'public'::regnamespace`) {
			if kind(row[1]) != "local" && (len(row[0]) > 54 || !strings.HasPrefix(row[0], row[1]+"_")) {
				t.Errorf("%s of %s", row[0], row[1])
			}
		}
	})
}

var (
	statement = regexp.MustCompile("(?s)`[^`]*\\b(?:SELECT|INSERT INTO|UPDATE|DELETE FROM)\\b[^`]*`")
	touches   = regexp.MustCompile(`\b(?:FROM|JOIN|INTO|UPDATE)\s+([a-z_]+)\b`)
	drawn     = regexp.MustCompile(`(?i)SET[^;]*(?:clock_timestamp|gen_random_uuid)\(\)|DO UPDATE\s+SET[^;]*\bnow\(\)|\bxmax\b|\bctid\b|\bMERGE INTO\b`)
)

// As far as text can tell: every statement that touches a building table names the building, but for those in files
// named *_all.go, which reach over all buildings on purpose.
func TestStatementsNameTheirBuilding(t *testing.T) {
	t.Parallel()
	found := 0
	err := filepath.WalkDir("../domain", func(path string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() || !strings.HasSuffix(path, ".go") || strings.HasSuffix(path, "_test.go") {
			return err
		}
		text, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		for _, sql := range statement.FindAllString(string(text), -1) {
			if drawn.MatchString(sql) {
				t.Errorf("%s: does what a sharded table refuses: %.80s", path, sql)
			}
			if strings.HasSuffix(path, "_all.go") {
				continue
			}
			for _, m := range touches.FindAllStringSubmatch(sql, -1) {
				if kind(m[1]) != "distributed" {
					continue
				}
				found++
				if !strings.Contains(sql, "building_id") {
					t.Errorf("%s: names no building: %.120s", path, sql)
				}
			}
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	if found < 30 {
		t.Errorf("only %d statements on building tables were seen: the test reads the wrong files", found)
	}
}

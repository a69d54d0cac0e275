package migrations_test

import (
	"fmt"
	"io/fs"
	"regexp"
	"slices"
	"testing"
	"testing/fstest"

	"github.com/jackc/pgx/v5"

	"lampward/domain/domaintest"
	"lampward/domain/postgres"
	"lampward/migrations"
)

func TestMain(m *testing.M) { domaintest.Main(m) }

func TestFilesArePairsInSequence(t *testing.T) {
	t.Parallel()
	entries, err := fs.ReadDir(migrations.Files, ".")
	if err != nil {
		t.Fatal(err)
	}
	form := regexp.MustCompile(`^(\d{6})_([a-z0-9_]+)\.(up|down)\.sql$`)
	names := map[string][]string{} // of each number: "name.direction"
	for _, e := range entries {
		parts := form.FindStringSubmatch(e.Name())
		if parts == nil {
			t.Errorf("%s is not named like 000001_subject.up.sql", e.Name())
			continue
		}
		names[parts[1]] = append(names[parts[1]], parts[2]+"."+parts[3])
		if info, err := e.Info(); err != nil || info.Size() == 0 {
			t.Errorf("%s is empty: %v", e.Name(), err)
		}
	}
	for i := range len(names) {
		number := fmt.Sprintf("%06d", i+1)
		pair := names[number]
		slices.Sort(pair)
		if len(pair) != 2 || pair[0][:len(pair[0])-len(".down")] != pair[1][:len(pair[1])-len(".up")] {
			t.Errorf("number %s has files %v, want one pair of up and down", number, pair)
		}
	}
}

// shape is everything that a migration can make, as text: columns, constraints, indexes, functions, types and views.
const shape = `
	SELECT coalesce(string_agg(line, E'\n' ORDER BY line COLLATE "C"), '') FROM (
	SELECT format('column %s.%s %s %s %s', c.relname, a.attname, format_type(a.atttypid, a.atttypmod), a.attnotnull,
	              pg_get_expr(d.adbin, d.adrelid)) AS line
	  FROM pg_class c
	  JOIN pg_attribute a ON a.attrelid = c.oid AND a.attnum > 0 AND NOT a.attisdropped
	  LEFT JOIN pg_attrdef d ON d.adrelid = c.oid AND d.adnum = a.attnum
	 WHERE c.relnamespace = 'public'::regnamespace AND c.relkind IN ('r', 'p', 'v', 'm', 'f')
	UNION ALL
	SELECT format('constraint %s.%s %s', conrelid::regclass, conname, pg_get_constraintdef(oid))
	  FROM pg_constraint WHERE connamespace = 'public'::regnamespace
	UNION ALL
	SELECT format('index %s', pg_get_indexdef(indexrelid))
	  FROM pg_index JOIN pg_class c ON c.oid = indexrelid WHERE c.relnamespace = 'public'::regnamespace
	UNION ALL
	SELECT format('relation %s %s', relkind, relname) FROM pg_class WHERE relnamespace = 'public'::regnamespace
	UNION ALL
	SELECT format('function %s', oid::regprocedure) FROM pg_proc WHERE pronamespace = 'public'::regnamespace
	UNION ALL
	SELECT format('type %s %s', typtype, typname) FROM pg_type
	 WHERE typnamespace = 'public'::regnamespace AND typtype IN ('e', 'd', 'r')
	) AS shapes WHERE line !~ 'schema_migrations'`

func TestUpDownUp(t *testing.T) {
	t.Parallel()
	ctx, url := t.Context(), domaintest.Empty(t)
	conn, err := pgx.Connect(ctx, url)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(ctx)
	read := func() (text string) {
		t.Helper()
		if err := conn.QueryRow(ctx, shape).Scan(&text); err != nil {
			t.Fatal(err)
		}
		return text
	}
	latest, err := postgres.Latest(migrations.Files)
	if err != nil {
		t.Fatal(err)
	}

	shapes := []string{read()} // after each number of migrations
	if shapes[0] != "" {
		t.Fatalf("an empty database holds:\n%s", shapes[0])
	}
	for version := uint(1); version <= latest; version++ {
		if _, to, err := postgres.Up(ctx, url, until(t, version)); err != nil || to != version {
			t.Fatalf("up to %d: at %d, %v", version, to, err)
		}
		shapes = append(shapes, read())
	}
	for version := latest; version > 0; version-- {
		if _, to, err := postgres.Down(ctx, url, migrations.Files, 1); err != nil || to != version-1 {
			t.Fatalf("down from %d: at %d, %v", version, to, err)
		}
		if got := read(); got != shapes[version-1] {
			t.Errorf("down from %d makes the schema\n%s\nwhich before going up was\n%s", version, got, shapes[version-1])
		}
	}
	if _, to, err := postgres.Up(ctx, url, migrations.Files); err != nil || to != latest {
		t.Fatalf("up again: at %d, %v, want %d", to, err, latest)
	}
	if got := read(); got != shapes[latest] || got == "" {
		t.Errorf("the second way up makes the schema\n%s\nand the first made\n%s", got, shapes[latest])
	}
}

// until returns the migrations up to a version.
func until(t *testing.T, version uint) fs.FS {
	t.Helper()
	dir := fstest.MapFS{}
	for _, direction := range []string{"up", "down"} {
		paths, err := fs.Glob(migrations.Files, "*."+direction+".sql")
		if err != nil {
			t.Fatal(err)
		}
		slices.Sort(paths)
		for _, path := range paths[:version] {
			content, err := migrations.Files.ReadFile(path)
			if err != nil {
				t.Fatal(err)
			}
			dir[path] = &fstest.MapFile{Data: content}
		}
	}
	return dir
}

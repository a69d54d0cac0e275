//go:build unix

package postgres

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"strings"
	"sync"
	"testing"
	"testing/fstest"
	"time"

	"github.com/jackc/pgx/v5"
)

// files makes a folder of migrations.
func files(pairs ...string) fs.FS {
	dir := fstest.MapFS{}
	for i := 0; i < len(pairs); i += 2 {
		dir[pairs[i]+".sql"] = &fstest.MapFile{Data: []byte(pairs[i+1])}
	}
	return dir
}

// house is a schema of three migrations.
var house = files(
	"000001_room.up", "CREATE TABLE room (n int);\nCREATE TABLE door (n int);", "000001_room.down", "DROP TABLE door; DROP TABLE room;",
	"000002_lamp.up", "CREATE TABLE lamp (n int);", "000002_lamp.down", "DROP TABLE lamp;",
	"000003_index.up", "CREATE INDEX CONCURRENTLY lamp_n ON lamp (n);", "000003_index.down", "DROP INDEX lamp_n;",
)

// fresh returns a function that makes empty databases on one server.
func fresh(t *testing.T) func(t *testing.T) (url string) {
	t.Helper()
	s := start(t, Options{Dir: ready(t), NoFsync: true})
	var mutex sync.Mutex
	number := 0
	return func(t *testing.T) string {
		t.Helper()
		mutex.Lock()
		defer mutex.Unlock()
		number++
		name := fmt.Sprintf("fresh%d", number)
		exec1(t, s.URL(), "CREATE DATABASE "+name)
		return s.DatabaseURL(name)
	}
}

func TestMigration(t *testing.T) {
	t.Parallel()
	database := fresh(t)
	at := func(t *testing.T, url string, want uint) {
		t.Helper()
		if got, dirty, err := Version(t.Context(), url); got != want || dirty || err != nil {
			t.Errorf("Version = %d, %v, %v, want %d, clean", got, dirty, err, want)
		}
	}

	t.Run("up, again, one down, all down, up", func(t *testing.T) {
		url := database(t)
		at(t, url, 0)
		for _, step := range []struct {
			name     string
			do       func() (uint, uint, error)
			from, to uint
		}{
			{"up", func() (uint, uint, error) { return Up(t.Context(), url, house) }, 0, 3},
			{"up again", func() (uint, uint, error) { return Up(t.Context(), url, house) }, 3, 3},
			{"one down", func() (uint, uint, error) { return Down(t.Context(), url, house, 1) }, 3, 2},
			{"more down than there are", func() (uint, uint, error) { return Down(t.Context(), url, house, 9) }, 2, 0},
			{"down from nothing", func() (uint, uint, error) { return Down(t.Context(), url, house, 1) }, 0, 0},
			{"up once more", func() (uint, uint, error) { return Up(t.Context(), url, house) }, 0, 3},
			{"all down", func() (uint, uint, error) { return Down(t.Context(), url, house, 0) }, 3, 0},
		} {
			from, to, err := step.do()
			if err != nil || from != step.from || to != step.to {
				t.Fatalf("%s: %d to %d, %v, want %d to %d", step.name, from, to, err, step.from, step.to)
			}
			at(t, url, step.to)
			want := map[uint]int{0: 0, 2: 3, 3: 3}[step.to]
			if got := ask[int](t, url, `SELECT count(*)::int FROM pg_class
				WHERE relkind = 'r' AND relnamespace = 'public'::regnamespace AND relname <> 'schema_migrations'`); got != want {
				t.Errorf("%s leaves %d tables, want %d", step.name, got, want)
			}
		}
		if _, _, err := Down(t.Context(), url, house, -1); err == nil {
			t.Error("a negative number of steps is taken")
		}
	})

	t.Run("connections are given back", func(t *testing.T) {
		url := database(t)
		if _, _, err := Up(t.Context(), url, house); err != nil {
			t.Fatal(err)
		}
		until(t, "no connection but the asking one is open", func() bool {
			return ask[int](t, url, `SELECT count(*)::int FROM pg_stat_activity WHERE datname = current_database()`) == 1
		})
	})

	t.Run("a failing migration names its line and leaves the state told", func(t *testing.T) {
		url := database(t)
		broken := files(
			"000001_room.up", "CREATE TABLE room (n int);", "000001_room.down", "DROP TABLE room;",
			"000002_lamp.up", "CREATE TABLE lamp (n int);\nCREATE TABLE driver (n imt);", "000002_lamp.down", "DROP TABLE lamp;",
		)
		_, _, err := Up(t.Context(), url, broken)
		if err == nil {
			t.Fatal("a broken migration succeeds")
		}
		for _, want := range []string{"version 2", "line 2", "CREATE TABLE driver (n imt);", `"imt" does not exist`} {
			if !strings.Contains(err.Error(), want) {
				t.Errorf("error %q does not say %q", err, want)
			}
		}
		if strings.Contains(err.Error(), "CREATE TABLE lamp") {
			t.Errorf("the error holds the whole file: %q", err)
		}
		if version, dirty, err := Version(t.Context(), url); version != 2 || !dirty || err != nil {
			t.Errorf("Version = %d, %v, %v, want 2, dirty", version, dirty, err)
		}
		for name, again := range map[string]func() (uint, uint, error){
			"up":   func() (uint, uint, error) { return Up(t.Context(), url, house) },
			"down": func() (uint, uint, error) { return Down(t.Context(), url, house, 0) },
		} {
			_, _, err := again()
			if dirty, ok := errors.AsType[*DirtyError](err); !ok || dirty.Version != 2 {
				t.Errorf("%s on a schema half way: %v, want a DirtyError of version 2", name, err)
			}
		}
		if err := Force(t.Context(), url, house, 1); err != nil {
			t.Fatal(err)
		}
		if from, to, err := Up(t.Context(), url, house); from != 1 || to != 3 || err != nil {
			t.Errorf("after the version was put right: %d to %d, %v, want 1 to 3", from, to, err)
		}
	})

	t.Run("a first migration that fails can be begun anew", func(t *testing.T) {
		url := database(t)
		if _, _, err := Up(t.Context(), url, files("000001_room.up", "CREATE", "000001_room.down", "DROP TABLE room;")); err == nil {
			t.Fatal("a broken migration succeeds")
		}
		if err := Force(t.Context(), url, house, 0); err != nil {
			t.Fatal(err)
		}
		at(t, url, 0)
		if _, to, err := Up(t.Context(), url, house); to != 3 || err != nil {
			t.Errorf("to %d, %v", to, err)
		}
	})

	t.Run("a newer database is refused", func(t *testing.T) {
		url := database(t)
		if _, _, err := Up(t.Context(), url, house); err != nil {
			t.Fatal(err)
		}
		older := files("000001_room.up", "CREATE TABLE room (n int);", "000001_room.down", "DROP TABLE room;")
		if _, _, err := Up(t.Context(), url, older); err == nil || !strings.Contains(err.Error(), "run the newer program") {
			t.Errorf("an older program on a newer database: %v", err)
		}
		at(t, url, 3)
	})

	t.Run("many programs at once", func(t *testing.T) {
		url := database(t)
		var group sync.WaitGroup
		applied := make([]uint, 4)
		for i := range applied {
			group.Go(func() {
				from, to, err := Up(t.Context(), url, house)
				if err != nil || to != 3 {
					t.Errorf("program %d: to %d, %v", i, to, err)
				}
				applied[i] = to - from
			})
		}
		group.Wait()
		total := uint(0)
		for _, n := range applied {
			total += n
		}
		if total != 3 {
			t.Errorf("the programs applied %v migrations, want 3 by one of them", applied)
		}
	})

	t.Run("waiting for another program ends with the context", func(t *testing.T) {
		url := database(t)
		other := connect(t, url)
		if _, err := other.Exec(t.Context(), `SELECT pg_advisory_lock($1)`, migrationLock); err != nil {
			t.Fatal(err)
		}
		ctx, cancel := context.WithTimeout(t.Context(), 200*time.Millisecond)
		defer cancel()
		if _, _, err := Up(ctx, url, house); !errors.Is(err, context.DeadlineExceeded) {
			t.Errorf("with another program at it: %v, want a deadline passed", err)
		}
		at(t, url, 0)
	})

	t.Run("a reader may ask for the version", func(t *testing.T) {
		url := database(t)
		if _, _, err := Up(t.Context(), url, house); err != nil {
			t.Fatal(err)
		}
		exec1(t, url, `CREATE ROLE reader LOGIN PASSWORD 'r'; GRANT SELECT ON schema_migrations TO reader`)
		config, err := pgx.ParseConfig(url)
		if err != nil {
			t.Fatal(err)
		}
		asReader := strings.Replace(url, "lampward:"+config.Password+"@", "reader:r@", 1)
		at(t, asReader, 3)
	})
}

func TestLatest(t *testing.T) {
	t.Parallel()
	if got, err := Latest(house); got != 3 || err != nil {
		t.Errorf("Latest = %d, %v, want 3", got, err)
	}
	if got, err := Latest(files()); err == nil {
		t.Errorf("Latest of no migrations = %d, want an error", got)
	}
}

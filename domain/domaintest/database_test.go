package domaintest

import (
	"context"
	"fmt"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"github.com/jackc/pgx/v5"
)

// hang, in the environment, makes this test binary start its server and wait to be killed.
const hang = "LAMPWARD_TEST_HANG"

func TestMain(m *testing.M) {
	if os.Getenv(hang) != "" {
		if err := startServer(); err != nil {
			fmt.Println(err)
			os.Exit(1)
		}
		fmt.Println(run.base)
		select {}
	}
	Main(m, func(ctx context.Context, url string) error {
		conn, err := pgx.Connect(ctx, url)
		if err != nil {
			return err
		}
		defer conn.Close(ctx)
		_, err = conn.Exec(ctx, `CREATE TABLE prepared (n int); INSERT INTO prepared VALUES (42)`)
		return err
	})
}

func TestEachTestHasItsOwnMigratedDatabase(t *testing.T) {
	t.Parallel()
	for i := range 4 {
		t.Run(fmt.Sprint(i), func(t *testing.T) {
			t.Parallel()
			db := DB(t)
			if got := db.Config().MaxConns; got != 4 {
				t.Errorf("the pool has %d connections, want 4", got)
			}
			var tables, prepared int
			if err := db.QueryRow(t.Context(), `SELECT count(*) FROM building`).Scan(&tables); err != nil {
				t.Fatal(err)
			}
			// Another test's row would be a second one here.
			if _, err := db.Exec(t.Context(), `INSERT INTO prepared VALUES ($1)`, i); err != nil {
				t.Fatal(err)
			}
			if err := db.QueryRow(t.Context(), `SELECT count(*) FROM prepared`).Scan(&prepared); err != nil {
				t.Fatal(err)
			}
			if prepared != 2 {
				t.Errorf("%d rows in the table, want this test's and the template's", prepared)
			}
		})
	}
}

func TestEmptyHasNoSchema(t *testing.T) {
	t.Parallel()
	conn, err := pgx.Connect(t.Context(), Empty(t))
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(context.Background())
	var tables int
	const count = `SELECT count(*) FROM pg_class WHERE relnamespace = 'public'::regnamespace`
	if err := conn.QueryRow(t.Context(), count).Scan(&tables); err != nil {
		t.Fatal(err)
	}
	if tables != 0 {
		t.Errorf("%d tables in a database said to be empty", tables)
	}
}

// BenchmarkDatabase measures the copy of the template and its drop, which each test pays.
func BenchmarkDatabase(b *testing.B) {
	URL(b) // starts the server
	ctx := b.Context()
	for b.Loop() {
		for _, sql := range []string{
			`CREATE DATABASE measured TEMPLATE ` + template + ` STRATEGY file_copy`, `DROP DATABASE measured`,
		} {
			if _, err := run.admin.Exec(ctx, sql); err != nil {
				b.Fatal(err)
			}
		}
	}
}

// failing, in the environment, makes the next test the failing test that it examines.
const failing = "LAMPWARD_TEST_FAILING"

func TestFailedTestKeepsItsDatabase(t *testing.T) {
	if os.Getenv(failing) != "" {
		DB(t)
		t.Fatal("as asked")
	}
	t.Parallel()
	exe, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	for _, tt := range []struct {
		flag string
		says string
		kept bool
	}{
		{"-keep=false", "-args -keep", false},
		{"-keep", "PGPASSWORD=$(cat ", true},
	} {
		t.Run(tt.flag, func(t *testing.T) {
			t.Parallel()
			cmd := exec.Command(exe, "-test.run", "^TestFailedTestKeepsItsDatabase$", tt.flag)
			cmd.Env = append(os.Environ(), failing+"=1")
			content, err := cmd.CombinedOutput()
			out := string(content)
			if err == nil {
				t.Error("the failing run reports success")
			}
			for _, want := range []string{"as asked", "testfailedtestkeepsitsdatabase_1: psql 'postgres://", tt.says} {
				if !strings.Contains(out, want) {
					t.Errorf("the failing run does not say %q:\n%s", want, out)
				}
			}
			_, rest, _ := strings.Cut(out, "host=")
			escaped, _, _ := strings.Cut(rest, "&")
			socket, err := url.QueryUnescape(escaped)
			if err != nil || !strings.Contains(socket, basePrefix) {
				t.Fatalf("no folder in the output: %v\n%s", err, out)
			}
			base := filepath.Dir(filepath.Dir(socket))
			if _, err := os.Stat(base); os.IsNotExist(err) == tt.kept {
				t.Errorf("%s: %v, want kept to be %v", base, err, tt.kept)
			}
			if err := os.RemoveAll(base); err != nil {
				t.Error(err)
			}
		})
	}
}

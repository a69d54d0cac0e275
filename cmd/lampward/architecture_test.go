package main

import (
	"encoding/json"
	"errors"
	"io"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"
)

// rooms is the one line of the domain: each room may use those to its left alone.
var rooms = []string{"event", "access", "site", "plant", "review", "life", "planning", "stock", "work", "handover", "hook", "job"}

// outside is what each room of the domain may use besides the standard library, other rooms and calc.
var outside = map[string][]string{
	"":         {"github.com/jackc/pgx/v5", "github.com/google/uuid"},
	"postgres": {"github.com/jackc/pgx/v5", "github.com/golang-migrate/migrate/v4", "golang.org/x/sys"},
	"event":    {"github.com/jackc/pgx/v5", "github.com/gowebpki/jcs"},
	"access":   {"github.com/jackc/pgx/v5"},
	"site":     {"github.com/jackc/pgx/v5"},
	"plant":    {"github.com/jackc/pgx/v5"},
	"review":   {"github.com/jackc/pgx/v5", "golang.org/x/sync"},
	"life":     {"github.com/jackc/pgx/v5"},
	"planning": {"github.com/jackc/pgx/v5"},
	"handover": {"github.com/jackc/pgx/v5", "github.com/xuri/excelize/v2"},
	"job":      {"github.com/jackc/pgx/v5", "github.com/riverqueue/river"},
}

// program is every module in the binary: a new one is a line here, and so a decision somebody reads.
var program = []string{
	"github.com/alecthomas/kong", "github.com/beorn7/perks", "github.com/cespare/xxhash/v2", "github.com/gabriel-vasile/mimetype", "github.com/gin-contrib/sse",
	"github.com/gin-gonic/gin", "github.com/go-playground/locales", "github.com/go-playground/universal-translator", "github.com/go-playground/validator/v10",
	"github.com/golang-migrate/migrate/v4", "github.com/google/uuid", "github.com/gowebpki/jcs", "github.com/jackc/pgerrcode", "github.com/jackc/pgpassfile",
	"github.com/jackc/pgservicefile", "github.com/jackc/pgx/v5", "github.com/jackc/puddle/v2", "github.com/klauspost/compress", "github.com/leodido/go-urn",
	"github.com/mattn/go-isatty", "github.com/munnerz/goautoneg", "github.com/prometheus/client_golang", "github.com/prometheus/client_model", "github.com/prometheus/common",
	"github.com/prometheus/procfs", "github.com/riverqueue/river", "github.com/riverqueue/river/riverdriver", "github.com/riverqueue/river/riverdriver/riverpgxv5",
	"github.com/riverqueue/river/rivershared", "github.com/riverqueue/river/rivertype", "github.com/swaggest/swgui", "github.com/vearutop/statigz", "github.com/xuri/excelize/v2",
	// Brought by the web framework, the job library and the workbook library.
	"github.com/goccy/go-yaml", "github.com/pelletier/go-toml/v2", "github.com/quic-go/qpack", "github.com/quic-go/quic-go", "github.com/ugorji/go/codec",
	"go.mongodb.org/mongo-driver/v2", "github.com/tidwall/gjson", "github.com/tidwall/match", "github.com/tidwall/pretty", "github.com/tidwall/sjson",
	"github.com/richardlehane/mscfb", "github.com/richardlehane/msoleps", "github.com/tiendc/go-deepcopy", "github.com/xuri/efp", "github.com/xuri/nfp",
	"gonum.org/v1/gonum", "golang.org/x/crypto", "golang.org/x/net", "golang.org/x/sync", "golang.org/x/sys", "golang.org/x/text", "golang.org/x/time", "google.golang.org/protobuf",
}

type listed struct {
	ImportPath   string
	Imports      []string
	TestImports  []string
	XTestImports []string
}

func list(t *testing.T, patterns ...string) []listed {
	t.Helper()
	cmd := exec.Command("go", append([]string{"list", "-json=ImportPath,Imports,TestImports,XTestImports"}, patterns...)...)
	cmd.Dir = "../.."
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	var all []listed
	for d := json.NewDecoder(strings.NewReader(string(out))); ; {
		var p listed
		if err := d.Decode(&p); errors.Is(err, io.EOF) {
			return all
		} else if err != nil {
			t.Fatal(err)
		}
		all = append(all, p)
	}
}

func standard(path string) bool { return !strings.Contains(strings.SplitN(path, "/", 2)[0], ".") }

func under(path string, roots ...string) bool {
	return slices.ContainsFunc(roots, func(r string) bool { return path == r || strings.HasPrefix(path, r+"/") })
}

// TestWhoKnowsWhom reads every import of every package against the rules of the house.
func TestWhoKnowsWhom(t *testing.T) {
	t.Parallel()
	for _, p := range list(t, "./...") {
		path := strings.TrimPrefix(p.ImportPath, "lampward/")
		for _, i := range p.Imports {
			inside, ours := strings.CutPrefix(i, "lampward/")
			bad := ""
			switch {
			case under(path, "calc"):
				if slices.Contains([]string{"context", "os", "io", "net", "net/http", "log", "log/slog", "database/sql"}, i) || !standard(i) && !ours && !under(i, "gonum.org/v1/gonum") || ours && !under(inside, "calc") {
					bad = "calc is pure arithmetic"
				}
			case path == "domain" || under(path, "domain"):
				room, _, _ := strings.Cut(strings.TrimPrefix(strings.TrimPrefix(path, "domain"), "/"), "/")
				other, _, _ := strings.Cut(strings.TrimPrefix(strings.TrimPrefix(inside, "domain"), "/"), "/")
				switch {
				case room == "domaintest":
				case ours && !under(inside, "domain", "calc"):
					bad = "the domain knows calc and itself"
				case ours && under(inside, "domain") && other != "" && slices.Contains(rooms, room) &&
					(!slices.Contains(rooms, other) || slices.Index(rooms, other) >= slices.Index(rooms, room)):
					bad = "a room uses those to its left"
				case ours && room == "" && under(inside, "domain"):
					bad = "the root of the domain uses no room"
				case !ours && !standard(i) && !under(i, outside[room]...):
					bad = "not on the list of this room"
				case i == "net/http" || i == "html/template" || i == "text/template":
					bad = "the edge is elsewhere"
				}
			case under(path, "api"):
				if ours && !under(inside, "domain", "api") && !(under(inside, "calc/loading")) {
					bad = "the edge knows the domain"
				}
			case path == "migrations", path == "deploy":
				if ours {
					bad = "it stands alone"
				}
			}
			if i == "lampward/domain/domaintest" && path != "domain/domaintest" {
				bad = "it is for tests alone"
			}
			if bad != "" {
				t.Errorf("%s imports %s: %s", path, i, bad)
			}
		}
	}
}

// TestModules holds the list of modules in the binary.
func TestModules(t *testing.T) {
	t.Parallel()
	cmd := exec.Command("go", "list", "-deps", "-f", "{{with .Module}}{{if not .Main}}{{.Path}}{{end}}{{end}}", "./cmd/lampward")
	cmd.Dir = "../.."
	out, err := cmd.Output()
	if err != nil {
		t.Fatal(err)
	}
	found := strings.Fields(string(out))
	slices.Sort(found)
	for _, m := range slices.Compact(found) {
		if !slices.Contains(program, m) {
			t.Errorf("the binary holds %s, which is not on the list", m)
		}
	}
}

// source calls each with every Go file below some folders, tests left out.
func source(t *testing.T, each func(path, text string), folders ...string) {
	t.Helper()
	for _, f := range folders {
		err := filepath.WalkDir(filepath.Join("..", "..", f), func(path string, d fs.DirEntry, err error) error {
			if err != nil || d.IsDir() || !strings.HasSuffix(path, ".go") || strings.HasSuffix(path, "_test.go") {
				return err
			}
			text, err := os.ReadFile(path)
			each(strings.TrimPrefix(filepath.ToSlash(path), "../../"), string(text))
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
	}
}

// TestPlaces holds what may be written where: SQL in the domain and the migrations, edits made by the review alone, the
// environment read by the program alone, the clock by nobody in the domain.
func TestPlaces(t *testing.T) {
	t.Parallel()
	sql := regexp.MustCompile("[\"`]\\s*(SELECT|INSERT INTO|UPDATE|DELETE FROM) ")
	source(t, func(path, text string) {
		if sql.MatchString(text) {
			t.Errorf("%s holds SQL", path)
		}
	}, "api", "cmd", "calc")
	source(t, func(path, text string) {
		if strings.Contains(text, "plant.NewEdit(") && path != "domain/review/change.go" {
			t.Errorf("%s makes an Edit: the review package alone does", path)
		}
		if strings.Contains(text, "os.Getenv(") || strings.Contains(text, "os.LookupEnv(") {
			if !strings.HasPrefix(path, "domain/postgres/") && !strings.HasPrefix(path, "domain/domaintest/") {
				t.Errorf("%s reads the environment: the program alone does", path)
			}
		}
	}, "domain", "api", "calc")
	source(t, func(path, text string) {
		if strings.Contains(text, "now()") && strings.Contains(text, "SELECT") && regexp.MustCompile(`(?i)[=(, ]now\(\)`).MatchString(regexp.MustCompile("(?s)`[^`]*`").FindString(text)) {
			t.Errorf("%s asks the database for the time: a scope carries it", path)
		}
	}, "domain")
	source(t, func(path, text string) {
		if strings.Contains(text, "html/template") && !strings.HasPrefix(path, "api/console/") {
			t.Errorf("%s makes pages: api/console does", path)
		}
	}, "api", "cmd")
}

// TestTree holds the top level of the project.
func TestTree(t *testing.T) {
	t.Parallel()
	entries, err := os.ReadDir("../..")
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range entries {
		if strings.HasPrefix(e.Name(), ".") {
			continue
		}
		if !slices.Contains([]string{"cmd", "api", "domain", "calc", "migrations", "deploy", "openapi.yaml", "go.mod", "go.sum", "README.md", "DEVELOPERS.md"}, e.Name()) {
			t.Errorf("%s is no part of the top level", e.Name())
		}
	}
}

//go:build unix

package deploy_test

import (
	"encoding/json"
	"os"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/goccy/go-yaml"
)

// offered reads which metrics the program serves from the contributor's guide, whose table a test of the program holds equal
// to what it answers; beside them, those of the process that its library adds.
func offered(t *testing.T) []string {
	t.Helper()
	names := []string{"process_resident_memory_bytes"}
	for _, found := range regexp.MustCompile("(?m)^\\| `([a-z_]+)").FindAllStringSubmatch(read(t, "../DEVELOPERS.md"), -1) {
		names = append(names, found[1])
	}
	if len(names) < 10 {
		t.Fatalf("the guide lists %d metrics", len(names)-1)
	}
	return names
}

// checkMetrics fails for metrics in the expression that the program does not serve.
func checkMetrics(t *testing.T, where, expression string) {
	t.Helper()
	served := offered(t)
	names := regexp.MustCompile(`\b(lampward|process|go|river)_[a-z_]+\b`).FindAllString(expression, -1)
	if len(names) == 0 && !strings.Contains(expression, `up{job="lampward"}`) {
		t.Errorf("%s: no metric in %s", where, expression)
	}
	for _, name := range names {
		base := name
		for _, part := range []string{"_bucket", "_count", "_sum"} {
			base = strings.TrimSuffix(base, part)
		}
		if !slices.Contains(served, name) && !slices.Contains(served, base) {
			t.Errorf("%s: the program has no metric %s", where, name)
		}
	}
	if strings.Count(expression, "(") != strings.Count(expression, ")") ||
		strings.Count(expression, "{") != strings.Count(expression, "}") ||
		strings.Count(expression, "[") != strings.Count(expression, "]") {
		t.Errorf("%s: brackets do not match in %s", where, expression)
	}
	// Each replica serves the same business figures: a sum over them would count a finding once a replica.
	for _, business := range []string{"lampward_findings", "lampward_findings_by_rule", "lampward_coverage_ratio", "lampward_review_pending"} {
		use := regexp.MustCompile(`(max(?: by \([a-z, ]+\))? ?\(|label_values\()?` + business + `\b`)
		for _, found := range use.FindAllStringSubmatch(expression, -1) {
			if found[1] == "" {
				t.Errorf("%s: %s without max by in %s", where, business, expression)
			}
		}
	}
}

func parse(t *testing.T, path string, into any) {
	t.Helper()
	if err := yaml.UnmarshalWithOptions([]byte(read(t, path)), into, yaml.Strict()); err != nil {
		t.Fatalf("%s: %v", path, err)
	}
}

func TestAlerts(t *testing.T) {
	t.Parallel()
	var file struct {
		Groups []struct {
			Name  string `yaml:"name"`
			Rules []struct {
				Alert       string            `yaml:"alert"`
				Expr        string            `yaml:"expr"`
				For         string            `yaml:"for"`
				Labels      map[string]string `yaml:"labels"`
				Annotations map[string]string `yaml:"annotations"`
			} `yaml:"rules"`
		} `yaml:"groups"`
	}
	parse(t, "alerts.yaml", &file)
	seen := map[string]bool{}
	for _, group := range file.Groups {
		for _, rule := range group.Rules {
			if seen[rule.Alert] || rule.Alert == "" {
				t.Errorf("alert %q twice or without a name", rule.Alert)
			}
			seen[rule.Alert] = true
			checkMetrics(t, rule.Alert, rule.Expr)
			if s := rule.Labels["severity"]; s != "page" && s != "ticket" {
				t.Errorf("%s: severity %q", rule.Alert, s)
			}
			if rule.Annotations["summary"] == "" || rule.Annotations["action"] == "" {
				t.Errorf("%s says not what it is, or not what to do", rule.Alert)
			}
		}
	}
	if len(seen) < 5 {
		t.Errorf("%d alerts", len(seen))
	}
}

func TestDashboard(t *testing.T) {
	t.Parallel()
	type place struct{ X, Y, W, H int }
	var board struct {
		Panels []struct {
			ID          int
			Type        string
			Title       string
			Description string
			GridPos     place
			Targets     []struct{ Expr, RefID string }
		}
		Templating struct {
			List []struct{ Name, Type string }
		}
	}
	if err := json.Unmarshal([]byte(read(t, "dashboard.json")), &board); err != nil {
		t.Fatal(err)
	}
	ids := map[int]bool{}
	covered := map[[2]int]string{}
	for _, p := range board.Panels {
		if ids[p.ID] || p.Title == "" {
			t.Errorf("panel %d %q: the number twice, or no title", p.ID, p.Title)
		}
		ids[p.ID] = true
		for x := p.GridPos.X; x < p.GridPos.X+p.GridPos.W; x++ {
			for y := p.GridPos.Y; y < p.GridPos.Y+p.GridPos.H; y++ {
				if other := covered[[2]int{x, y}]; other != "" {
					t.Fatalf("panels %q and %q overlap", p.Title, other)
				}
				covered[[2]int{x, y}] = p.Title
			}
		}
		if p.GridPos.X+p.GridPos.W > 24 {
			t.Errorf("panel %q is wider than the board", p.Title)
		}
		if p.Type == "row" {
			continue
		}
		if len(p.Targets) == 0 || p.Description == "" {
			t.Errorf("panel %q shows nothing or does not say what", p.Title)
		}
		for _, target := range p.Targets {
			checkMetrics(t, p.Title, target.Expr)
		}
	}
	if len(board.Templating.List) != 2 {
		t.Errorf("variables %v, want the source and the building", board.Templating.List)
	}
}

func TestPrometheusReadsTheRules(t *testing.T) {
	t.Parallel()
	var config struct {
		Global        map[string]string `yaml:"global"`
		RuleFiles     []string          `yaml:"rule_files"`
		ScrapeConfigs []struct {
			JobName       string `yaml:"job_name"`
			StaticConfigs []struct {
				Targets []string `yaml:"targets"`
			} `yaml:"static_configs"`
		} `yaml:"scrape_configs"`
	}
	parse(t, "prometheus.yaml", &config)
	if !slices.Equal(config.RuleFiles, []string{"alerts.yaml"}) {
		t.Errorf("rule files %v", config.RuleFiles)
	}
	if len(config.ScrapeConfigs) != 1 || config.ScrapeConfigs[0].JobName != "lampward" {
		t.Errorf("jobs %v, want the one the rules name", config.ScrapeConfigs)
	}
}

func TestCompose(t *testing.T) {
	t.Parallel()
	var file struct {
		Services map[string]struct {
			Image       string            `yaml:"image"`
			Environment map[string]string `yaml:"environment"`
			Ports       []string          `yaml:"ports"`
			Volumes     []string          `yaml:"volumes"`
			ReadOnly    bool              `yaml:"read_only"`
			Privileged  bool              `yaml:"privileged"`
			CapDrop     []string          `yaml:"cap_drop"`
			Secrets     []string          `yaml:"secrets"`
		} `yaml:"services"`
		Secrets map[string]struct {
			File string `yaml:"file"`
		} `yaml:"secrets"`
	}
	if err := yaml.Unmarshal([]byte(read(t, "compose.yaml")), &file); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"database", "migrate", "lampward", "prometheus"} {
		if _, ok := file.Services[name]; !ok {
			t.Errorf("no service %s", name)
		}
	}
	withPassword := regexp.MustCompile(`://[^/@]*:[^/@]*@`)
	for name, s := range file.Services {
		if s.Privileged {
			t.Errorf("%s is privileged", name)
		}
		if name != "database" && name != "archive" && (!s.ReadOnly || !slices.Contains(s.CapDrop, "ALL")) {
			t.Errorf("%s may write to its image, or keeps rights", name)
		}
		for key, value := range s.Environment {
			if strings.HasSuffix(key, "PASSWORD") || withPassword.MatchString(value) {
				t.Errorf("%s: a secret in %s", name, key)
			}
		}
		for _, port := range s.Ports {
			if !strings.HasPrefix(port, "127.0.0.1:") {
				t.Errorf("%s: port %s is open to the network", name, port)
			}
		}
		for _, secret := range s.Secrets {
			if !strings.HasPrefix(file.Secrets[secret].File, "./secret/") {
				t.Errorf("%s: secret %s is not kept in ./secret", name, secret)
			}
		}
		for _, volume := range s.Volumes {
			if source, _, _ := strings.Cut(volume, ":"); strings.HasPrefix(source, "./") {
				if _, err := os.Stat(source); err != nil {
					t.Errorf("%s: %v", name, err)
				}
			}
		}
	}
	if ignored := read(t, "../.gitignore"); !strings.Contains(ignored, "/deploy/secret/\n") {
		t.Error("the folder of the secrets is not ignored")
	}
}

func TestUnitIsHardened(t *testing.T) {
	t.Parallel()
	settings := map[string]string{}
	for line := range strings.Lines(read(t, "lampward.service")) {
		if name, value, ok := strings.Cut(strings.TrimSpace(line), "="); ok && !strings.HasPrefix(line, "#") {
			settings[name] = value
		}
	}
	for name, want := range map[string]string{
		"DynamicUser": "yes", "NoNewPrivileges": "yes", "ProtectSystem": "strict", "ProtectHome": "yes", "PrivateDevices": "yes",
		"CapabilityBoundingSet": "", "RestrictNamespaces": "yes", "MemoryDenyWriteExecute": "yes", "Restart": "on-failure",
		"ExecStart": "/usr/bin/lampward serve", "EnvironmentFile": "/etc/lampward/environment",
	} {
		if got, ok := settings[name]; !ok || got != want {
			t.Errorf("%s=%s, want %s", name, got, want)
		}
	}
}

func TestImage(t *testing.T) {
	t.Parallel()
	file := read(t, "Containerfile")
	_, last, ok := strings.Cut(file, "FROM scratch\n")
	if !ok || strings.Contains(last, "RUN ") {
		t.Error("the image is not made of copies alone")
	}
	for _, want := range []string{"CGO_ENABLED=0", "USER 65532:65532", "ca-certificates.crt"} {
		if !strings.Contains(file, want) {
			t.Errorf("the Containerfile lacks %s", want)
		}
	}
}

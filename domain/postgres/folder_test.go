package postgres

import (
	"path/filepath"
	"testing"
)

func TestDefaultDir(t *testing.T) {
	t.Parallel()
	for _, tt := range []struct {
		system      string
		root        bool
		environment map[string]string
		want        string // empty: an error
	}{
		{"linux", false, map[string]string{"HOME": "/home/ada"}, "/home/ada/.local/share/lampward/database"},
		{"linux", false, map[string]string{"HOME": "/home/ada", "XDG_DATA_HOME": "/data"}, "/data/lampward/database"},
		{"linux", false, map[string]string{"HOME": "/home/ada", "XDG_DATA_HOME": "data"}, "/home/ada/.local/share/lampward/database"},
		{"linux", true, map[string]string{"HOME": "/root"}, "/var/lib/lampward/database"},
		{"linux", false, nil, ""},
		{"darwin", false, map[string]string{"HOME": "/Users/ada"}, "/Users/ada/Library/Application Support/lampward/database"},
		{"darwin", true, nil, "/usr/local/var/lampward/database"},
		{"windows", false, map[string]string{"LOCALAPPDATA": "/c/ada"}, "/c/ada/lampward/database"},
		{"windows", false, map[string]string{"HOME": "/home/ada"}, ""},
	} {
		got, err := defaultDir(tt.system, tt.root, func(name string) string { return tt.environment[name] })
		if filepath.ToSlash(got) != tt.want || (err != nil) != (tt.want == "") {
			t.Errorf("%s, root %v, %v: %q, %v, want %q", tt.system, tt.root, tt.environment, got, err, tt.want)
		}
	}
}

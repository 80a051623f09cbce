package main

import (
	"fmt"
	"go/parser"
	"go/token"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// The direction of imports between the folders of this module. The compiler
// holds that there are no cycles; this holds the rest.

const (
	modulePath  = "holdfast"
	arrowModule = "github.com/apache/arrow"
)

// mayImport says which of our folders each folder may import; "*" is every
// folder but cmd. A folder that is not here has no place in the map yet.
var mayImport = map[string][]string{
	"cmd":               {"*"},
	"bench":             {"*"},
	"io":                {"solver", "selection"},
	"resample":          {"solver", "selection"},
	"resample/forecast": {"resample", "solver", "selection"},
	"selection":         {},
	"solver":            {"solver/kernel"},
	"solver/kernel":     {},
}

// vagueNames are names that say nothing of what a package holds.
var vagueNames = []string{"util", "utils", "common", "helper", "helpers", "misc", "shared"}

// source is a Go file with what it says of itself and what it imports.
type source struct {
	file    string // slash-separated, from the module root
	pkg     string
	imports []string
}

// area is the row of mayImport that a folder belongs to: its longest prefix.
func area(dir string) (name string, ok bool) {
	for ; dir != "."; dir = path.Dir(dir) {
		if _, ok := mayImport[dir]; ok {
			return dir, true
		}
	}
	return "", false
}

// violations lists every breach of the map, one line each.
func violations(sources []source) []string {
	var found []string
	for _, s := range sources {
		dir := path.Dir(s.file)
		from, ok := area(dir)
		if !ok {
			found = append(found, fmt.Sprintf("%s: folder %s is not in the map", s.file, dir))
			continue
		}
		for _, name := range append(strings.Split(dir, "/"), s.pkg) {
			if slices.Contains(vagueNames, strings.TrimSuffix(name, "_test")) {
				found = append(found, fmt.Sprintf("%s: %s is no name for a package", s.file, name))
			}
		}
		for _, target := range s.imports {
			if why := s.breach(from, dir, target); why != "" {
				found = append(found, fmt.Sprintf("%s imports %s: %s", s.file, target, why))
			}
		}
	}
	return found
}

// external reports whether a file is a test that stands outside its package,
// as a caller does. It may join packages, but neither cmd nor Arrow.
func (s source) external() bool {
	return strings.HasSuffix(s.file, "_test.go") && strings.HasSuffix(s.pkg, "_test")
}

// breach says why a file of folder dir must not import target; "" if it may.
func (s source) breach(from, dir, target string) string {
	if target == arrowModule || strings.HasPrefix(target, arrowModule+"/") {
		if from != "io" {
			return "only io/* imports Arrow"
		}
		return ""
	}
	to, ours := strings.CutPrefix(target, modulePath+"/")
	if !ours || to == dir { // an external test imports its own package
		return ""
	}
	toArea, ok := area(to)
	switch allowed := mayImport[from]; {
	case !ok:
		return "not in the map"
	case toArea == "cmd":
		return "nothing imports cmd"
	case s.external(), slices.Contains(allowed, "*"), slices.Contains(allowed, toArea):
		return ""
	}
	return fmt.Sprintf("%s may import %v of ours", from, mayImport[from])
}

// readSources parses the imports of every Go file of the module, whatever
// its build tags, tests included. Folders that the go command leaves out, and
// modules of their own, are left out.
func readSources(root string) ([]source, error) {
	var out []source
	err := filepath.WalkDir(root, func(file string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() {
			if file != root && (ignored(d.Name()) || hasModule(file)) {
				return filepath.SkipDir
			}
			return nil
		}
		if !strings.HasSuffix(file, ".go") || ignored(d.Name()) {
			return nil
		}
		s, err := readSource(root, file)
		out = append(out, s)
		return err
	})
	return out, err
}

func ignored(name string) bool {
	return name == "testdata" || name[0] == '.' || name[0] == '_'
}

func hasModule(dir string) bool {
	_, err := os.Stat(filepath.Join(dir, "go.mod"))
	return err == nil
}

func readSource(root, file string) (source, error) {
	parsed, err := parser.ParseFile(token.NewFileSet(), file, nil, parser.ImportsOnly)
	if err != nil {
		return source{}, err
	}
	name, err := filepath.Rel(root, file)
	if err != nil {
		return source{}, err
	}
	s := source{file: filepath.ToSlash(name), pkg: parsed.Name.Name}
	for _, spec := range parsed.Imports {
		target, err := strconv.Unquote(spec.Path.Value)
		if err != nil {
			return source{}, err
		}
		s.imports = append(s.imports, target)
	}
	return s, nil
}

func TestImportArrows(t *testing.T) {
	sources, err := readSources(filepath.Join("..", ".."))
	if err != nil {
		t.Fatal(err)
	}
	for _, v := range violations(sources) {
		t.Error(v)
	}
	seen := map[string]bool{}
	for _, s := range sources {
		if name, ok := area(path.Dir(s.file)); ok {
			seen[name] = true
		}
	}
	for name := range mayImport {
		if !seen[name] {
			t.Errorf("no file of %s was looked at", name)
		}
	}
}

// Every rule is broken once, so that the check above is seen to fail, and
// what is allowed is not accused.
func TestImportArrowsAreSeenToBreak(t *testing.T) {
	const arrow = arrowModule + "/go/v17/parquet"
	for _, c := range []struct {
		file, pkg, target, says string // says "": allowed
	}{
		{"solver/a.go", "solver", "holdfast/selection", "solver may import"},
		{"solver/a_test.go", "solver", "holdfast/selection", "solver may import"},
		{"solver/a_test.go", "solver_test", "holdfast/cmd/holdfast", "nothing imports cmd"},
		{"solver/a_test.go", "solver_test", arrow, "only io/* imports Arrow"},
		{"solver/a.go", "solver", "holdfast/io/table", "solver may import"},
		{"solver/a.go", "solver", "holdfast/resample", "solver may import"},
		{"solver/kernel/a.go", "kernel", "holdfast/solver", "solver/kernel may import"},
		{"solver/kernel/avx/a.go", "avx", "holdfast/solver", "solver/kernel may import"},
		{"selection/a.go", "selection", "holdfast/solver", "selection may import"},
		{"selection/a.go", "selection", "holdfast/io/report", "selection may import"},
		{"resample/a.go", "resample", "holdfast/io/rundir", "resample may import"},
		{"resample/forecast/a.go", "forecast", "holdfast/io/rundir", "resample/forecast may import"},
		{"io/table/a.go", "table", "holdfast/io/study", "io may import"},
		{"io/rundir/a.go", "rundir", "holdfast/resample", "io may import"},
		{"io/rundir/a.go", "rundir", "holdfast/bench/drawn", "io may import"},
		{"io/report/a.go", "report", "holdfast/cmd/holdfast", "nothing imports cmd"},
		{"bench/a_test.go", "bench", "holdfast/cmd/holdfast", "nothing imports cmd"},
		{"cmd/holdfast/a.go", "main", arrow, "only io/* imports Arrow"},
		{"resample/a_test.go", "resample", arrow, "only io/* imports Arrow"},
		{"solver/a.go", "solver", arrowModule, "only io/* imports Arrow"},
		{"cmd/holdfast/a.go", "main", "holdfast/tools", "not in the map"},
		{"tools/a.go", "tools", "fmt", "not in the map"},
		{"a.go", "holdfast", "fmt", "not in the map"},
		{"io/common/a.go", "files", "fmt", "common is no name"},
		{"solver/a.go", "helpers", "fmt", "helpers is no name"},
		{"resample/util/a_test.go", "util_test", "fmt", "util"},

		{"cmd/holdfast/a.go", "main", "holdfast/io/table", ""},
		{"bench/a.go", "main", "holdfast/resample", ""},
		{"io/table/a.go", "table", arrow, ""},
		{"io/table/a_test.go", "table_test", "holdfast/io/table", ""},
		{"solver/a_test.go", "solver_test", "holdfast/selection", ""},
		{"io/rundir/a.go", "rundir", "holdfast/solver", ""},
		{"resample/a.go", "resample", "holdfast/selection", ""},
		{"resample/forecast/a.go", "forecast", "holdfast/resample", ""},
		{"solver/a.go", "solver", "holdfast/solver/kernel", ""},
		{"solver/a.go", "solver", "github.com/apache/arrowhead", ""},
		{"selection/a.go", "selection", "gonum.org/v1/gonum/stat/distuv", ""},
	} {
		got := strings.Join(violations([]source{{c.file, c.pkg, []string{c.target}}}), "; ")
		if (c.says == "") != (got == "") || !strings.Contains(got, c.says) {
			t.Errorf("%s (package %s) importing %s: %q, want %q", c.file, c.pkg, c.target, got, c.says)
		}
	}
}

// The reader finds imports in tests and behind build tags, and passes over
// what is not of this module.
func TestReadSources(t *testing.T) {
	root := t.TempDir()
	for name, text := range map[string]string{
		"go.mod":                "module holdfast\n",
		"solver/a_arm64.go":     "//go:build arm64\n\npackage solver\n\nimport \"holdfast/io/table\"\n",
		"solver/a_test.go":      "package solver\n\nimport alias \"holdfast/selection\"\n",
		"solver/testdata/b.go":  "package broken\n\nimport \"holdfast/cmd\"\n",
		"bench/peer/go.mod":     "module peer\n",
		"bench/peer/c.go":       "package peer\n\nimport \"holdfast/cmd\"\n",
		".hidden/d.go":          "package hidden\n\nimport \"holdfast/cmd\"\n",
		"solver/notes/plain.md": "import \"holdfast/cmd\"\n",
	} {
		file := filepath.Join(root, filepath.FromSlash(name))
		if err := os.MkdirAll(filepath.Dir(file), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(file, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	sources, err := readSources(root)
	if err != nil {
		t.Fatal(err)
	}
	if got := violations(sources); len(sources) != 2 || len(got) != 2 {
		t.Errorf("%d files, violations %q", len(sources), got)
	}
}

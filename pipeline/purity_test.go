package pipeline

import (
	"go/ast"
	"go/parser"
	"go/token"
	"io/fs"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

const module = "pkvigil"

// imports lists the packages of the module with what their non-test files
// import themselves.
func imports(t *testing.T) map[string][]string {
	t.Helper()
	out := map[string][]string{}
	root := ".."
	err := filepath.WalkDir(root, func(p string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() && p != root && (strings.HasPrefix(d.Name(), ".") || d.Name() == "testdata" || d.Name() == "bin") {
			return filepath.SkipDir
		}
		if d.IsDir() || !strings.HasSuffix(p, ".go") || strings.HasSuffix(p, "_test.go") {
			return nil
		}
		f, err := parser.ParseFile(token.NewFileSet(), p, nil, parser.ImportsOnly)
		if err != nil {
			return err
		}
		rel, err := filepath.Rel(root, filepath.Dir(p))
		if err != nil {
			return err
		}
		pkg := module + "/" + filepath.ToSlash(rel)
		out[pkg] = append(out[pkg], f.Name.Name+"!")
		for _, i := range f.Imports {
			path, err := strconv.Unquote(i.Path.Value)
			if err != nil {
				return err
			}
			out[pkg] = append(out[pkg], path)
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	if len(out) < 20 {
		t.Fatalf("only %d packages were found", len(out))
	}
	return out
}

// deps lists everything a package is built from.
func deps(t *testing.T, pkgs ...string) []string {
	t.Helper()
	out, err := exec.CommandContext(t.Context(), "go", append([]string{"list", "-deps", "-f", "{{.ImportPath}}"}, pkgs...)...).CombinedOutput()
	if err != nil {
		t.Fatalf("go list: %v: %s", err, out)
	}
	return strings.Fields(string(out))
}

// pure are the packages that know no database, queue, logger, network, file
// system or clock.
func pure(pkgs map[string][]string) []string {
	var out []string
	for p := range pkgs {
		if p == module+"/parse" || strings.HasPrefix(p, module+"/parse/") {
			out = append(out, p)
		}
	}
	for _, n := range []string{"naming", "spectra", "acidbase", "fit", "verdict", "chart", "drift", "settings", "assay"} {
		out = append(out, module+"/pipeline/"+n)
	}
	slices.Sort(out)
	return out
}

func TestPurePackagesStayPure(t *testing.T) {
	all := imports(t)
	for _, p := range pure(all) {
		if all[p] == nil {
			t.Errorf("package %s is gone", p)
		}
		for _, i := range all[p] {
			if i == "os" || i == "net" || strings.HasPrefix(i, "net/") || strings.HasPrefix(i, "os/") || i == "log" || i == "log/slog" {
				t.Errorf("%s imports %s", p, i)
			}
		}
	}
	for _, d := range deps(t, pure(all)...) {
		for _, bad := range []string{"github.com/jackc/", "github.com/riverqueue/", "github.com/rs/zerolog", "github.com/fsnotify/", "github.com/spf13/", module + "/db", module + "/watcher"} {
			if strings.HasPrefix(d, bad) {
				t.Errorf("a pure package is built from %s", d)
			}
		}
		if d == module+"/pipeline" || d == "net" || strings.HasPrefix(d, "net/") && d != "net/netip" && d != "net/url" {
			t.Errorf("a pure package is built from %s", d)
		}
	}
}

// time.Now and its relatives are for the service's clock.
func TestPurePackagesHaveNoClock(t *testing.T) {
	for _, p := range pure(imports(t)) {
		dir := filepath.Join("..", strings.TrimPrefix(p, module+"/"))
		files, err := filepath.Glob(filepath.Join(dir, "*.go"))
		if err != nil {
			t.Fatal(err)
		}
		for _, f := range files {
			if strings.HasSuffix(f, "_test.go") {
				continue
			}
			for _, call := range clockCalls(t, f) {
				t.Errorf("%s calls %s", f, call)
			}
		}
	}
}

// The arrows: cmd, pipeline, db, pure packages, parse; the watcher stands alone.
func TestArrowsPointOneWay(t *testing.T) {
	all := imports(t)
	for p, is := range all {
		for _, i := range is {
			if !strings.HasPrefix(i, module+"/") {
				continue
			}
			from, to := strings.TrimPrefix(p, module+"/"), strings.TrimPrefix(i, module+"/")
			bad := ""
			switch {
			case strings.HasPrefix(to, "cmd/"):
				bad = "nothing imports a command"
			case to == "pipeline" && !strings.HasPrefix(from, "cmd/"):
				bad = "only commands import pipeline"
			case strings.HasPrefix(from, "watcher"):
				bad = "the watcher stands alone"
			case strings.HasPrefix(from, "parse") && !strings.HasPrefix(to, "parse"):
				bad = "parse imports parse alone"
			case strings.HasPrefix(from, "db") && to == "watcher":
				bad = "db knows no files"
			case from == "pipeline/rehearse" && (to == "pipeline/fit" || to == "pipeline/acidbase"):
				bad = "the rehearsal has a chemistry of its own"
			case to == "db/dbtest":
				bad = "dbtest is for tests"
			}
			if bad != "" {
				t.Errorf("%s imports %s: %s", from, to, bad)
			}
		}
	}
	for _, d := range deps(t, module+"/pipeline/rehearse") {
		if d == module+"/pipeline/fit" || d == module+"/pipeline/acidbase" {
			t.Errorf("the rehearsal is built from %s", d)
		}
	}
}

func TestNamesOfPackages(t *testing.T) {
	for p, is := range imports(t) {
		names := []string{filepath.Base(p)}
		for _, i := range is {
			if n, ok := strings.CutSuffix(i, "!"); ok {
				names = append(names, n)
			}
		}
		for _, n := range names {
			if slices.Contains([]string{"util", "utils", "common", "helper", "helpers", "types", "model", "models", "core", "base", "misc", "shared"}, n) {
				t.Errorf("package %s is called %s, which says nothing", p, n)
			}
		}
	}
}

// clockCalls lists the calls in a file that ask or wait for the machine's clock.
func clockCalls(t *testing.T, file string) []string {
	t.Helper()
	f, err := parser.ParseFile(token.NewFileSet(), file, nil, parser.SkipObjectResolution)
	if err != nil {
		t.Fatal(err)
	}
	var out []string
	ast.Inspect(f, func(n ast.Node) bool {
		if s, ok := n.(*ast.SelectorExpr); ok {
			if x, ok := s.X.(*ast.Ident); ok && x.Name == "time" && slices.Contains([]string{"Now", "Since", "Until", "Sleep", "After", "Tick", "NewTimer", "NewTicker", "AfterFunc"}, s.Sel.Name) {
				out = append(out, "time."+s.Sel.Name)
			}
		}
		return true
	})
	return out
}

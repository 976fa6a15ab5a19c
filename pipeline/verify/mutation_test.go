package verify

import (
	"encoding/json"
	"fmt"
	"go/ast"
	"go/constant"
	"go/importer"
	"go/parser"
	"go/token"
	"go/types"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// A mutant is one number in the source of a package that is made one per cent
// too large.
type mutant struct {
	File, Text, Source, Func string // Source: the line it stands in
	Line                     int
}

// mutate rewrites the sources of a package so that every floating-point number
// in them, written out or by the name of a constant, can be made one per cent
// too large at run time. It returns the new text of each file and the mutants.
func mutate(t *testing.T, dir string, only func(file string) bool) (map[string]string, []mutant) {
	t.Helper()
	fset := token.NewFileSet()
	var files []*ast.File
	var names []string
	list, err := filepath.Glob(filepath.Join(dir, "*.go"))
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range list {
		if strings.HasSuffix(name, "_test.go") {
			continue
		}
		f, err := parser.ParseFile(fset, name, nil, parser.SkipObjectResolution)
		if err != nil {
			t.Fatal(err)
		}
		files, names = append(files, f), append(names, name)
	}
	info := &types.Info{Types: map[ast.Expr]types.TypeAndValue{}, Uses: map[*ast.Ident]types.Object{}}
	conf := types.Config{Importer: importer.ForCompiler(fset, "source", nil)}
	if _, err := conf.Check(files[0].Name.Name, fset, files, info); err != nil {
		t.Fatal(err)
	}
	var mutants []mutant
	byConst := map[types.Object]int{}
	out := map[string]string{}
	for i, f := range files {
		if !only(filepath.Base(names[i])) {
			continue
		}
		src, err := os.ReadFile(names[i])
		if err != nil {
			t.Fatal(err)
		}
		out[names[i]] = rewrite(fset, f, src, info, func(e ast.Expr, o types.Object) int {
			at := fset.Position(e.Pos())
			if k, ok := byConst[o]; ok && o != nil {
				return k
			}
			text := string(src[at.Offset:fset.Position(e.End()).Offset])
			mutants = append(mutants, mutant{filepath.Base(names[i]), text, strings.Split(string(src), "\n")[at.Line-1], enclosing(f, e.Pos()), at.Line})
			if o != nil {
				byConst[o] = len(mutants) - 1
			}
			return len(mutants) - 1
		})
	}
	return out, mutants
}

// rewrite wraps the numbers of one file; number gives the number of a mutant.
func rewrite(fset *token.FileSet, f *ast.File, src []byte, info *types.Info, number func(ast.Expr, types.Object) int) string {
	type edit struct {
		from, to int
		text     string
	}
	var edits []edit
	isFloat := func(e ast.Expr) bool {
		tv := info.Types[e]
		b, ok := tv.Type.(*types.Basic)
		return ok && b.Kind() == types.Float64 && tv.Value != nil && constant.Sign(tv.Value) != 0
	}
	wrap := func(e ast.Expr, o types.Object) {
		from, to := fset.Position(e.Pos()).Offset, fset.Position(e.End()).Offset
		edits = append(edits, edit{from, to, fmt.Sprintf("mutated(%d, %s)", number(e, o), src[from:to])})
	}
	ast.Inspect(f, func(n ast.Node) bool {
		switch x := n.(type) {
		case *ast.GenDecl:
			return x.Tok != token.CONST && x.Tok != token.IMPORT
		case *ast.SelectorExpr:
			return false // math.Pi is not ours
		case *ast.BasicLit:
			if isFloat(x) {
				wrap(x, nil)
			}
		case *ast.Ident:
			if o, ok := info.Uses[x].(*types.Const); ok && isFloat(x) {
				wrap(x, o)
			}
		}
		return true
	})
	slices.SortFunc(edits, func(a, b edit) int { return b.from - a.from })
	text := string(src)
	for _, e := range edits {
		text = text[:e.from] + e.text + text[e.to:]
	}
	return text
}

// TestEveryConstantIsNoticed makes every number of the chemistry one per cent
// too large, one after the other, in the real code, and asks for a failing row.
func TestEveryConstantIsNoticed(t *testing.T) {
	if testing.Short() {
		t.Skip("builds an altered program")
	}
	if _, err := exec.LookPath("go"); err != nil {
		t.Skip("no go command to build the altered program with")
	}
	dir, err := filepath.Abs(filepath.Join("..", "acidbase"))
	if err != nil {
		t.Fatal(err)
	}
	here, err := filepath.Abs(".")
	if err != nil {
		t.Fatal(err)
	}
	sources, mutants := mutate(t, dir, func(file string) bool {
		return slices.Contains([]string{"water.go", "activity.go", "temperature.go", "acids.go", "buffers.go", "dye.go"}, file)
	})
	tmp := t.TempDir()
	replace := map[string]string{}
	put := func(target, text string) {
		file := filepath.Join(tmp, fmt.Sprintf("%d.go", len(replace)))
		if err := os.WriteFile(file, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
		replace[target] = file
	}
	for name, text := range sources {
		put(name, text)
	}
	put(filepath.Join(dir, "zz_mutated.go"), "package acidbase\n\n// Mutant is the number that is wrong; -1 for none.\nvar Mutant = -1\n\nfunc mutated(n int, x float64) float64 {\n\tif n == Mutant {\n\t\treturn 1.01 * x\n\t}\n\treturn x\n}\n")
	put(filepath.Join(here, "zz_mutants_test.go"), fmt.Sprintf(mutantRunner, len(mutants)))
	overlay, err := json.Marshal(map[string]any{"Replace": replace})
	if err != nil {
		t.Fatal(err)
	}
	file := filepath.Join(tmp, "overlay.json")
	if err := os.WriteFile(file, overlay, 0o644); err != nil {
		t.Fatal(err)
	}
	cmd := exec.CommandContext(t.Context(), "go", "test", "-overlay", file, "-count=1", "-run", "^TestMutants$", "-v", ".")
	said, err := cmd.CombinedOutput()
	if err != nil {
		t.Fatalf("%v\n%s", err, said)
	}
	if !strings.Contains(string(said), "unaltered: 0 rows fail") {
		t.Fatalf("the altered program does not pass unaltered:\n%s", said)
	}
	unseen := 0
	for line := range strings.Lines(string(said)) {
		var n int
		if _, err := fmt.Sscanf(line, "unseen %d", &n); err != nil {
			continue
		}
		if reason := excused(mutants[n]); reason == "" {
			t.Errorf("%s:%d: %s may be one per cent wrong and no row fails", mutants[n].File, mutants[n].Line, mutants[n].Text)
		}
		unseen++
	}
	t.Logf("%d numbers altered one by one, %d of them excused", len(mutants), unseen)
	if len(mutants) < 300 {
		t.Errorf("only %d numbers were altered", len(mutants))
	}
}

// enclosing names the function a position lies in.
func enclosing(f *ast.File, pos token.Pos) string {
	for _, d := range f.Decls {
		if fn, ok := d.(*ast.FuncDecl); ok && fn.Pos() <= pos && pos < fn.End() {
			return fn.Name.Name
		}
	}
	return ""
}

// excused gives the reason why an error of a number need not be noticed: it is
// no published figure, or its effect is below every printed digit.
func excused(m mutant) string {
	in := func(funcs ...string) bool { return slices.Contains(funcs, m.Func) }
	switch m.File {
	case "acids.go":
		switch {
		case in("substances", "salts", "carboxylates") || strings.Contains(m.Source, "moles:"):
			return "a whole number of ions in a formula; recipes are held to electroneutrality by the tests of acidbase"
		case in("formSize") || m.Text == "DefaultSize":
			return "size of a form of a buffer acid in the extended model; no recipe is published with it"
		case strings.Contains(m.Source, `"formate"`) || strings.Contains(m.Source, `"sulfate"`):
			return "enthalpy and heat capacity without a source among the figures"
		}
	case "activity.go":
		if in("Limit", "LogGammaSlope") {
			return "range of validity, or step of a numerical derivative"
		}
	case "buffers.go":
		switch {
		case in("standards") && slices.Contains([]string{"0.0025", "0.002", "0.005", "60"}, m.Text):
			return "our choice of an uncertainty, or end of a range"
		case in("buffer", "BufferNear"):
			return "step of a numerical derivative, or how near a nominal value must be"
		}
	case "dye.go":
		switch {
		case strings.Contains(m.Source, "Salinity") || strings.Contains(m.Source, "TempC: [2]"):
			return "range of validity or, of bcp-2021, a wavelength that is not among the figures"
		case strings.Contains(m.Source, "Key: "):
			return "range of validity, or a wavelength without a figure"
		}
	case "water.go":
		if in("Density", "Permittivity") || m.Func == "PKw" && m.Text == "1" {
			return "where one equation takes over from another that agrees with it, the pressure in bar, or a term that does not count beside 1e5"
		}
	}
	return ""
}

const mutantRunner = `package verify

import (
	"fmt"
	"testing"

	"pkvigil/pipeline/acidbase"
)

func TestMutants(t *testing.T) {
	groups := []func() []Check{activity, water, nernst, buffers, acids, recipes, constants, dyes}
	var checks []Check
	for _, g := range groups {
		checks = append(checks, g()...)
	}
	fails := func() int {
		for _, c := range checks {
			if !c.run().Pass {
				return 1
			}
		}
		return 0
	}
	fmt.Printf("unaltered: %%d rows fail\n", fails())
	for n := range %d {
		acidbase.Mutant = n
		if fails() == 0 {
			fmt.Printf("unseen %%d\n", n)
		}
	}
}
`

package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/rogpeppe/go-internal/testscript"

	"pkvigil/db/dbtest"
	"pkvigil/pipeline/settings"
	"pkvigil/pipeline/verdict"
)

// withServer runs the tests and takes the test server away afterwards.
type withServer struct{ m *testing.M }

func (w withServer) Run() int { return dbtest.Main(w.m) }

func TestMain(m *testing.M) {
	beKilled()
	testscript.Main(withServer{m}, map[string]func(){"pkvigil": main})
}

// scriptCommands are what the scripts have beside the usual words.
func scriptCommands() map[string]func(*testscript.TestScript, bool, []string) {
	return map[string]func(*testscript.TestScript, bool, []string){
		"exits": exits, "answer": answer, "interrupted": interrupted,
	}
}

// exits CODE COMMAND...: the command ends with exactly this code.
func exits(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 2 {
		ts.Fatalf("usage: exits CODE COMMAND...")
	}
	want, err := strconv.Atoi(args[0])
	ts.Check(err)
	got := 0
	if err := ts.Exec(args[1], args[2:]...); err != nil {
		var exit *exec.ExitError
		if !errors.As(err, &exit) {
			ts.Fatalf("%v", err)
		}
		got = exit.ExitCode()
	}
	if got != want {
		ts.Fatalf("exit code %d, %d expected", got, want)
	}
}

// answer [FIELD...]: standard output of the last command is JSON of version 1
// whose answer, or its first element, has these fields.
func answer(ts *testscript.TestScript, neg bool, args []string) {
	var v struct {
		Version int `json:"version"`
		Answer  any `json:"answer"`
	}
	if err := json.Unmarshal([]byte(ts.ReadFile("stdout")), &v); err != nil {
		ts.Fatalf("no JSON: %v", err)
	}
	if v.Version != 1 || v.Answer == nil {
		ts.Fatalf("version %d, answer %v", v.Version, v.Answer)
	}
	if list, ok := v.Answer.([]any); ok {
		if len(list) == 0 {
			ts.Fatalf("the answer is an empty list")
		}
		v.Answer = list[0]
	}
	for _, f := range args {
		m, ok := v.Answer.(map[string]any)
		if !ok {
			ts.Fatalf("the answer is %T", v.Answer)
		}
		if _, there := m[f]; there == neg {
			ts.Fatalf("field %q: present %v; fields %v", f, there, sortedKeys(m))
		}
	}
}

// interrupted SIGNAL CODE PATTERN COMMAND...: once standard error or output of
// the command shows the pattern, the signal ends it with this code.
func interrupted(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 4 {
		ts.Fatalf("usage: interrupted SIGNAL CODE PATTERN COMMAND...")
	}
	script := `"$@" >watched 2>&1 & pid=$!
for i in $(seq 1 600); do grep -q -e "$PATTERN" watched && break; sleep 0.1; done
kill -"$SIGNAL" $pid; wait $pid; code=$?; cat watched; exit $code`
	ts.Setenv("SIGNAL", args[0])
	ts.Setenv("PATTERN", args[2])
	exits(ts, false, append([]string{args[1], "bash", "-c", script, "bash"}, args[3:]...))
}

func params(t *testing.T, files []string, env map[string]string) testscript.Params {
	t.Helper()
	return testscript.Params{Files: files, Cmds: scriptCommands(), RequireUniqueNames: true, Setup: func(e *testscript.Env) error {
		e.Setenv("NO_COLOR", "1")
		e.Setenv("HOME", e.WorkDir)
		e.Setenv("TMPDIR", os.TempDir())
		for k, v := range env {
			e.Setenv(k, v)
		}
		return nil
	}}
}

// TestScripts runs what needs no measured night.
func TestScripts(t *testing.T) {
	files, err := filepath.Glob("testdata/*.txtar")
	if err != nil {
		t.Fatal(err)
	}
	files = slices.DeleteFunc(files, func(f string) bool { return strings.HasPrefix(filepath.Base(f), "night") })
	lab := shortDir(t)
	testscript.Run(t, params(t, files, map[string]string{"LAB": lab}))
}

// shortDir is a folder for the private server's data that every account may
// pass and whose path leaves room for that of a socket.
func shortDir(t *testing.T) string {
	t.Helper()
	dir, err := os.MkdirTemp("/tmp", "pkvc-")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := os.RemoveAll(dir); err != nil {
			t.Error(err)
		}
	})
	if err := os.Chmod(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	return dir
}

// TestNight rehearses one night into a fresh database on the test server,
// works it off, and lets the scripts and the dashboards' queries ask about it.
func TestNight(t *testing.T) {
	admin := dbtest.NewEmpty(t).Pool().Config().ConnString()
	owner, service := roles(t, admin)
	dir := t.TempDir()
	ctx := t.Context()
	call := func(args ...string) string {
		t.Helper()
		var out, errs bytes.Buffer
		if code := run(ctx, args, &out, &errs); code != exitOK {
			t.Fatalf("pkvigil %s: exit code %d\n%s%s", strings.Join(args, " "), code, out.String(), errs.String())
		}
		return out.String()
	}
	if out := call("rehearse", "--dir", dir, "--from", "1", "--to", "1"); !strings.Contains(out, "pkvigil once -s") {
		t.Errorf("rehearse does not say how to go on: %s", out)
	}
	file := filepath.Join(dir, "pkvigil.toml")
	onServer(t, file)
	t.Setenv("PKVIGIL_TEST_URL", owner)
	if out := call("schema", "migrate", "-s", file); !strings.Contains(out, "schema 0 -> ") {
		t.Errorf("migrating says %q", out)
	}
	t.Setenv("PKVIGIL_TEST_URL", service)
	table := call("once", "-s", file)
	if !regexp.MustCompile(`2026-09-14\s+U1\s+12\s+12`).MatchString(table) {
		t.Errorf("not every planned set of U1 was seen:\n%s", table)
	}
	t.Run("queries", func(t *testing.T) { askAll(t, admin) })
	t.Run("scripts", func(t *testing.T) {
		testscript.Run(t, params(t, []string{"testdata/night.txtar"}, map[string]string{
			"PKVIGIL_SETTINGS": file, "PKVIGIL_TEST_URL": service, "DIR": dir,
		}))
	})
	t.Run("backup", func(t *testing.T) { backup(t, admin, file) })
}

// roles runs deploy/roles.sql and gives the addresses of owner and service.
func roles(t *testing.T, admin string) (owner, service string) {
	t.Helper()
	sql, err := os.ReadFile("../../deploy/roles.sql")
	if err != nil {
		t.Fatal(err)
	}
	c, err := pgx.Connect(t.Context(), admin)
	if err != nil {
		t.Fatal(err)
	}
	defer c.Close(context.Background())
	for range 2 { // a second time changes nothing
		if _, err := c.PgConn().Exec(t.Context(), string(sql)).ReadAll(); err != nil {
			t.Fatalf("deploy/roles.sql: %v", err)
		}
	}
	// The private server lets only its own account and readers in: the role is
	// taken at the start of each session, with its rights and no others.
	as := func(role string) string {
		u, err := url.Parse(admin)
		if err != nil {
			t.Fatal(err)
		}
		q := u.Query()
		q.Set("role", role)
		u.RawQuery = q.Encode()
		return u.String()
	}
	t.Cleanup(func() {
		c, err := pgx.Connect(context.Background(), admin)
		if err != nil {
			t.Error(err)
			return
		}
		defer c.Close(context.Background())
		for _, sql := range []string{"drop owned by pkvigil_service, pkvigil_owner cascade", "drop role pkvigil_service, pkvigil_owner"} {
			if _, err := c.Exec(context.Background(), sql); err != nil {
				t.Error(err)
			}
		}
	})
	return as("pkvigil_owner"), as("pkvigil_service")
}

// backup dumps the night, restores it into an empty database, and asks whether
// the trail is intact and the digits are the same.
func backup(t *testing.T, admin, file string) {
	if _, err := exec.LookPath("pg_dump"); err != nil {
		if found, _ := filepath.Glob("/usr/lib/postgresql/*/bin/pg_dump"); len(found) == 0 {
			t.Skip("pg_dump is not installed")
		}
	}
	empty := dbtest.NewEmpty(t).Pool().Config().ConnString()
	script := func(name, at string, args ...string) string {
		t.Helper()
		c, err := pgx.ParseConfig(at)
		if err != nil {
			t.Fatal(err)
		}
		cmd := exec.Command("../../deploy/"+name, args...)
		cmd.Env = append(os.Environ(), "PGHOST="+c.Host, "PGPORT="+strconv.Itoa(int(c.Port)), "PGUSER="+c.User, "PGPASSWORD="+c.Password, "PGDATABASE="+c.Database)
		out, err := cmd.CombinedOutput()
		if err != nil {
			t.Fatalf("deploy/%s: %v\n%s", name, err, out)
		}
		return string(out)
	}
	dir := t.TempDir()
	said := script("backup.sh", admin, dir)
	dump, _, ok := strings.Cut(said, ": ")
	if !ok || !strings.HasSuffix(dump, ".dump") {
		t.Fatalf("backup.sh says %q", said)
	}
	said = script("restore.sh", empty, dump)
	if !regexp.MustCompile(`(?m)^results [1-9]\d*$`).MatchString(said) {
		t.Errorf("restore.sh says %q", said)
	}
	t.Setenv("PKVIGIL_TEST_URL", empty)
	for _, args := range [][]string{{"deeds"}, {"again", "--all"}} {
		var out, errs bytes.Buffer
		if code := run(t.Context(), append(args, "-s", file), &out, &errs); code != exitOK {
			t.Errorf("after the restore, pkvigil %s: exit code %d\n%s%s", strings.Join(args, " "), code, out.String(), errs.String())
		}
	}
}

// onServer points a settings file at the server that the environment names.
func onServer(t *testing.T, file string) {
	t.Helper()
	text, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	re := regexp.MustCompile(`(?m)^data_dir = .*$`)
	if !re.Match(text) {
		t.Fatal("the rehearsed settings have no data_dir")
	}
	text = re.ReplaceAllFunc(text, func(l []byte) []byte { return append(l, "\ndatabase_url_env = \"PKVIGIL_TEST_URL\""...) })
	if err := os.WriteFile(file, text, 0o600); err != nil {
		t.Fatal(err)
	}
}

// asReader connects as a login that has the reader's rights and nothing else.
func asReader(t *testing.T, dsn string) *pgx.Conn {
	t.Helper()
	admin, err := pgx.Connect(t.Context(), dsn)
	if err != nil {
		t.Fatal(err)
	}
	defer admin.Close(t.Context())
	if _, err := admin.Exec(t.Context(), "create role dashboard_test login password 'for dashboards' in role pkvigil_reader"); err != nil {
		t.Fatal(err)
	}
	u, err := url.Parse(dsn)
	if err != nil {
		t.Fatal(err)
	}
	u.User = url.UserPassword("dashboard_test", "for dashboards")
	conn, err := pgx.Connect(t.Context(), u.String())
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		conn.Close(context.Background())
		c, err := pgx.Connect(context.Background(), dsn)
		if err != nil {
			t.Error(err)
			return
		}
		defer c.Close(context.Background())
		if _, err := c.Exec(context.Background(), "drop role dashboard_test"); err != nil {
			t.Error(err)
		}
	})
	return conn
}

// askAll runs the query of every view with the reader's rights. Those that a
// single night must answer give rows; none takes long.
func askAll(t *testing.T, dsn string) {
	conn := asReader(t, dsn)
	ctx := t.Context()
	rows, err := conn.Query(ctx, "select relname from pg_class where relnamespace = 'readout'::regnamespace and relkind = 'v' union select proname from pg_proc where pronamespace = 'readout'::regnamespace order by 1")
	if err != nil {
		t.Fatal(err)
	}
	views, err := pgx.CollectRows(rows, pgx.RowTo[string])
	if err != nil || len(views) < 25 {
		t.Fatalf("%d views, %v", len(views), err)
	}
	// One undisturbed night opens no case and no baseline, releases nothing, and every file of it fits a rule.
	mayBeEmpty := []string{"cases", "causes", "reach", "gaps", "strays", "deeds", "z_check", "pairs", "brackets"}
	for _, v := range views {
		sql, err := os.ReadFile(filepath.Join("..", "..", "deploy", "queries", v+".sql"))
		if err != nil {
			t.Errorf("view %s has no query in deploy/queries", v)
			continue
		}
		if !strings.HasPrefix(string(sql), "-- ") {
			t.Errorf("%s.sql does not begin with a comment that says what it asks", v)
		}
		for i, one := range statements(string(sql)) {
			start := time.Now()
			n, err := count(ctx, conn, one)
			took := time.Since(start)
			switch {
			case err != nil:
				t.Errorf("%s.sql, statement %d: %v", v, i+1, err)
			case n == 0 && !slices.Contains(mayBeEmpty, v):
				t.Errorf("%s.sql, statement %d: no rows", v, i+1)
			case took > 5*time.Second:
				t.Errorf("%s.sql, statement %d took %v", v, i+1, took)
			}
		}
	}
	extra, err := filepath.Glob("../../deploy/queries/*.sql")
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range extra {
		if !slices.Contains(views, strings.TrimSuffix(filepath.Base(f), ".sql")) {
			t.Errorf("%s asks no view of that name", f)
		}
	}
	if _, err := conn.Exec(ctx, "select * from pkvigil.result"); err == nil {
		t.Error("the reader sees more than schema readout")
	}
	for i, one := range blocks(t, "views", "sql") {
		if _, err := count(ctx, conn, strings.TrimSuffix(strings.TrimSpace(one), ";")); err != nil {
			t.Errorf("help views, example %d: %v", i+1, err)
		}
	}
}

func count(ctx context.Context, conn *pgx.Conn, sql string) (int, error) {
	rows, err := conn.Query(ctx, sql)
	if err != nil {
		return 0, err
	}
	n := 0
	for rows.Next() {
		n++
	}
	return n, rows.Err()
}

// statements takes a file apart at the semicolons that end lines.
func statements(sql string) []string {
	var out []string
	for _, s := range strings.Split(sql, ";\n") {
		var b strings.Builder
		for line := range strings.Lines(s) {
			if !strings.HasPrefix(strings.TrimSpace(line), "--") {
				b.WriteString(line)
			}
		}
		if strings.TrimSpace(b.String()) != "" {
			out = append(out, b.String())
		}
	}
	return out
}

// blocks gives the examples of a topic in one language.
func blocks(t *testing.T, name, language string) []string {
	t.Helper()
	page, ok := topic(name)
	if !ok {
		t.Fatalf("no topic %s", name)
	}
	var out []string
	for _, m := range regexp.MustCompile("(?s)```"+language+"\n(.*?)```").FindAllStringSubmatch(page, -1) {
		out = append(out, m[1])
	}
	if len(out) == 0 {
		t.Fatalf("topic %s has no %s example", name, language)
	}
	return out
}

// TestTopicExamples: every settings example of the topics is read by the
// program, alone; the rules of the cookbook hold their examples.
func TestTopicExamples(t *testing.T) {
	const rest = "\n[[folder]]\nname = \"folder\"\npath = \"/export/folder\"\n"
	n := 0
	for _, tp := range topics() {
		page, ok := topic(tp[0])
		if !ok || strings.Contains(page, "{{") {
			t.Errorf("topic %s cannot be given", tp[0])
		}
		if !strings.Contains(page, "```toml") {
			continue
		}
		for i, b := range blocks(t, tp[0], "toml") {
			n++
			if !strings.Contains(b, "[[folder]]") {
				b += rest
			}
			set, err := settings.Read([]byte(b), fmt.Sprintf("%s example %d", tp[0], i+1))
			if err == nil {
				err = knownChecks(set, []byte(b), tp[0])
			}
			if err != nil {
				t.Errorf("%v", err)
				continue
			}
			for _, r := range set.Rules {
				if len(r.Example) == 0 {
					t.Errorf("%s, rule %s has no example", tp[0], r.Name)
				}
			}
		}
	}
	if n < 20 {
		t.Errorf("only %d examples", n)
	}
	if n := len(blocks(t, "naming", "toml")); n != 16 {
		t.Errorf("%d naming situations", n)
	}
}

// TestReadmeFormats: the three files in the README are read as it says.
func TestReadmeFormats(t *testing.T) {
	text, err := os.ReadFile("../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	file := filepath.Join(dir, "pkvigil.toml")
	if err := os.WriteFile(file, []byte("[[folder]]\nname = \"f\"\npath = \""+dir+"\"\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	examples := regexp.MustCompile("(?s)   ```(csv|jcamp)\n(.*?)   ```").FindAllStringSubmatch(string(text), -1)
	want := []string{"2 scans", "1 scan", "3 pH readings"}
	if len(examples) != len(want) {
		t.Fatalf("%d examples of formats", len(examples))
	}
	for i, m := range examples {
		name := filepath.Join(dir, fmt.Sprintf("%d.%s", i+1, m[1]))
		if err := os.WriteFile(name, []byte(strings.ReplaceAll(m[2], "   ", "")), 0o600); err != nil {
			t.Fatal(err)
		}
		var out, errs bytes.Buffer
		if code := run(t.Context(), []string{"look", "--explain", name, "-s", file}, &out, &errs); code != exitOK || !strings.Contains(out.String(), want[i]) || strings.Contains(out.String(), "refused") {
			t.Errorf("example %d, exit code %d, %q expected:\n%s%s", i+1, code, want[i], out.String(), errs.String())
		}
	}
}

// TestCheckWords: the page of checks names exactly what the room that judges does.
func TestCheckWords(t *testing.T) {
	made := map[string]string{}
	files, err := filepath.Glob("../../pipeline/verdict/*.go")
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range files {
		src, err := os.ReadFile(f)
		if err != nil {
			t.Fatal(err)
		}
		for _, m := range regexp.MustCompile(`\.(number|finding)\("([a-z.]+)"`).FindAllStringSubmatch(string(src), -1) {
			made[m[2]] = m[1]
		}
	}
	if len(made) < 40 {
		t.Fatalf("only %d checks found in the source", len(made))
	}
	words, findings := checkWords(), findingWords()
	for k, kind := range made {
		_, number := words[k]
		_, finding := findings[k]
		if (kind == "number") != number || (kind == "finding") != finding {
			t.Errorf("check %s (%s) is missing from the page, or in the wrong part of it", k, kind)
		}
	}
	for k := range words {
		if _, ok := verdict.Defaults[k]; !ok || made[k] == "" {
			t.Errorf("the page names check %s, which is not made", k)
		}
	}
	for k := range findings {
		if made[k] == "" {
			t.Errorf("the page names check %s, which is not made", k)
		}
	}
}

// TestHelp: every command says what it does, in at most 80 columns, with an
// example of itself whose flags exist.
func TestHelp(t *testing.T) {
	var out, errs bytes.Buffer
	root := (&app{out: &out, err: &errs}).root()
	for _, c := range root.Commands() {
		if c.Hidden || c.Name() == "completion" {
			continue
		}
		if c.Short == "" || !strings.Contains(c.Example, "pkvigil "+c.Name()) {
			t.Errorf("%s has no example of itself", c.Name())
		}
		for _, m := range regexp.MustCompile(`(?m)^\s*pkvigil (\S+)[^\n]*`).FindAllStringSubmatch(c.Example, -1) {
			target, _, err := root.Find([]string{m[1]})
			if err != nil || target == root {
				t.Errorf("example of %s: no command %s", c.Name(), m[1])
				continue
			}
			for _, f := range regexp.MustCompile(`--([a-z-]+)`).FindAllStringSubmatch(m[0], -1) {
				if target.Flag(f[1]) == nil && !slices.Contains([]string{"help"}, f[1]) {
					t.Errorf("example of %s: %s has no --%s", c.Name(), target.Name(), f[1])
				}
			}
		}
		for line := range strings.Lines(c.Long + "\n" + c.Example) {
			if n := len([]rune(strings.TrimRight(line, "\n"))); n > 96 {
				t.Errorf("%s: a line of help has %d columns: %s", c.Name(), n, line)
			}
		}
	}
	for _, tp := range topics() {
		page, _ := topic(tp[0])
		if tp[0] == "naming" || tp[0] == "settings" {
			continue // patterns are as long as they are
		}
		for line := range strings.Lines(page) {
			if n := len([]rune(strings.TrimRight(line, "\n"))); n > 80 && !strings.HasPrefix(line, "sig=") {
				t.Errorf("topic %s: a line has %d columns: %s", tp[0], n, line)
			}
		}
	}
}

// TestManual writes the pages and reads them back.
func TestManual(t *testing.T) {
	dir := t.TempDir()
	var out, errs bytes.Buffer
	if code := run(t.Context(), []string{"help", "man", dir}, &out, &errs); code != exitOK {
		t.Fatalf("%d: %s", code, errs.String())
	}
	root := (&app{}).root()
	want := []string{"man1/pkvigil.1"}
	for _, c := range root.Commands() {
		if c.IsAvailableCommand() && c.Name() != "completion" {
			want = append(want, "man1/pkvigil-"+c.Name()+".1")
		}
	}
	for _, tp := range topics() {
		want = append(want, "man7/pkvigil-"+tp[0]+".7")
	}
	for _, f := range want {
		page, err := os.ReadFile(filepath.Join(dir, f))
		if err != nil {
			t.Error(err)
			continue
		}
		if !bytes.HasPrefix(page, []byte(".TH PKVIGIL")) || !bytes.Contains(page, []byte("\n.SH NAME\npkvigil")) {
			t.Errorf("%s is no manual page", f)
		}
		for line := range strings.Lines(string(page)) {
			if strings.HasPrefix(line, ".") && !regexp.MustCompile(`^\.(TH|SH|nf|fi)\b`).MatchString(line) {
				t.Errorf("%s: %q would be a command of the typesetter", f, line)
			}
		}
	}
}

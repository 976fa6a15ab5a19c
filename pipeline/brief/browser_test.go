package brief

import (
	"context"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// keepDir is where the pages and pictures of these tests are left to be looked
// at; without the variable they go with the test.
const keepDir = "PKVIGIL_KEEP_PAGES"

func pageDir(t *testing.T) string {
	if dir := os.Getenv(keepDir); dir != "" {
		return dir
	}
	return t.TempDir()
}

// TestChromium renders a full night and reads the page back as the browser
// understood it.
func TestChromium(t *testing.T) {
	browser, err := exec.LookPath("chromium")
	if err != nil {
		t.Skip("no chromium on this machine: the page is not rendered, its structure is tested elsewhere")
	}
	page, err := HTML(fullNight())
	if err != nil {
		t.Fatal(err)
	}
	dir := pageDir(t)
	file := filepath.Join(dir, "full.html")
	if err := os.WriteFile(file, page, 0o600); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithTimeout(context.Background(), 90*time.Second)
	defer cancel()
	shot := filepath.Join(dir, "full-390.png")
	cmd := exec.CommandContext(ctx, browser, "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking", "--disable-component-update", "--disable-sync",
		"--hide-scrollbars", "--enable-logging=stderr", "--user-data-dir="+t.TempDir(), "--window-size=390,2000", "--dump-dom", "--screenshot="+shot, "file://"+file)
	var out, said strings.Builder
	cmd.Stdout, cmd.Stderr = &out, &said
	if err := cmd.Run(); err != nil {
		t.Skipf("chromium does not run here: %v", err)
	}
	dom, errs := out.String(), said.String()
	if strings.Contains(errs, ":CONSOLE") {
		t.Errorf("the browser complained about the page:\n%s", errs)
	}
	// What the browser made of the page has as many elements of each kind as we wrote: nothing was closed early or dropped.
	for _, tag := range []string{"<svg", "<table", "<tr", "<h2", "<h3", "<article", "<details", "<figure", "<path", "<text", "<td"} {
		if got, want := strings.Count(dom, tag), strings.Count(string(page), tag); got != want {
			t.Errorf("%s: the browser has %d, the page %d", tag, got, want)
		}
	}
	if info, err := os.Stat(shot); err != nil || info.Size() < 10_000 {
		t.Errorf("screenshot at phone width: %v, %v", info, err)
	}
}

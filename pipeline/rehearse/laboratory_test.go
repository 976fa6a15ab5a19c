package rehearse

import (
	"os/exec"
	"slices"
	"strings"
	"testing"

	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
)

// The generator must share no chemistry with what it tests, and stay free of
// database, queue and logger.
func TestIndependentOfTheAnalysis(t *testing.T) {
	out, err := exec.Command("go", "list", "-deps", ".").Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	deps := strings.Fields(string(out))
	for _, d := range deps {
		for _, banned := range []string{"pkvigil/pipeline/", "pkvigil/parse", "pkvigil/db", "github.com/", "gonum.org/"} {
			if strings.HasPrefix(d, banned) && d != "pkvigil/pipeline/rehearse" {
				t.Errorf("depends on %s", d)
			}
		}
	}
	if !slices.Contains(deps, "pkvigil/pipeline/rehearse") {
		t.Fatalf("go list did not list this package: %q", deps)
	}
}

func laboratory(t *testing.T, s *Story) (*settings.Settings, *naming.Rules) {
	t.Helper()
	set, err := settings.Read(s.Settings("/data/quillmere"), "quillmere.toml")
	if err != nil {
		t.Fatal(err)
	}
	rules, err := naming.Compile(set.Rules)
	if err != nil {
		t.Fatal(err)
	}
	return set, rules
}

func TestSettingsRead(t *testing.T) {
	set, _ := laboratory(t, NewStory(1))
	if len(set.Compounds) != 10 || len(set.Folders) != 4 || len(set.Instruments) != 2 || len(set.People) != 3 {
		t.Errorf("%d compounds, %d folders, %d instruments, %d people", len(set.Compounds), len(set.Folders), len(set.Instruments), len(set.People))
	}
	wired, err := settings.Read(NewStory(1).SettingsWith("/data/quillmere", Wires{
		DataDir: "/var/lib/quillmere", MailHost: "127.0.0.1", MailPort: 2525,
		WebhookURL: "http://127.0.0.1:8712/hook", WebhookSecretEnv: "QUILLMERE_SECRET", Listen: "127.0.0.1:0",
	}), "wired.toml")
	if err != nil {
		t.Fatal(err)
	}
	if wired.Mail.Host != "127.0.0.1" || len(wired.Webhooks) != 1 || wired.People[0].Mail == "" {
		t.Errorf("mail %+v, webhooks %v, people %v", wired.Mail, wired.Webhooks, wired.People)
	}
	for _, f := range set.Folders {
		if f.Path != "/data/quillmere/"+f.Name || f.MarkerFile != MarkerFile {
			t.Errorf("folder %s at %s with marker %s", f.Name, f.Path, f.MarkerFile)
		}
	}
}

// Every file of every other night fits exactly one rule and gives the set it was made
// for, except the mistyped ones, which fit none.
func TestEveryFileFitsItsRule(t *testing.T) {
	s := NewStory(1)
	_, rules := laboratory(t, s)
	parked := map[string]bool{}
	for n := 1; n <= s.Nights(); n += 2 {
		for _, tr := range s.TruthOf(n) {
			if tr.Expect == ExpectParked {
				parked[tr.File] = true
			}
		}
		sets := map[string]bool{}
		for _, b := range s.Bookings(n) {
			sets[b.Key()] = true
		}
		for _, d := range s.Deposits(n) {
			if d.Act != Write || strings.HasSuffix(d.Path, ".part") {
				continue
			}
			m, err := rules.Match(d.Folder, d.Path)
			if parked[d.Folder+"/"+d.Path] {
				if err == nil {
					t.Errorf("mistyped %s fits rule %s", d.Path, m.Rule)
				}
				delete(parked, d.Folder+"/"+d.Path)
				continue
			}
			if err != nil {
				t.Errorf("%s/%s: %v", d.Folder, d.Path, err)
				continue
			}
			if d.Folder[0] == 'U' && !sets[d.Folder+"/"+m.Set] {
				t.Errorf("%s/%s belongs to set %q, which is not booked", d.Folder, d.Path, m.Set)
			}
		}
	}
	if len(parked) > 0 {
		t.Errorf("truth names mistyped files that were never written: %v", parked)
	}
}

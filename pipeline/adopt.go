package pipeline

import (
	"context"
	"errors"
	"fmt"
	"maps"
	"slices"
	"strings"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/parse/export"
	"pkvigil/pipeline/naming"
)

// An Adoption places a parked file in a set by hand.
type Adoption struct {
	File, Set   string // as a person types them: the path or its end, the key or a part of it
	Role        string // "" = scan
	Rung        string
	As, Because string
}

// Adopt carries out an adoption and its deed.
func (s *Service) Adopt(ctx context.Context, a Adoption) (string, error) {
	if strings.TrimSpace(a.As) == "" || strings.TrimSpace(a.Because) == "" {
		return "", errors.New("adopting needs a name and a reason: --as NAME --because \"...\"")
	}
	if a.Role == "" {
		a.Role = naming.RoleScan
	}
	var said string
	err := s.store.InTx(ctx, func(tx pgx.Tx) error {
		f, err := s.aside(ctx, tx, a.File)
		if err != nil {
			return err
		}
		set, err := s.FindSet(ctx, tx, a.Set)
		if err != nil {
			return err
		}
		raw, err := s.store.Bytes(ctx, tx, f.SHA256)
		if err != nil {
			return err
		}
		cfg, _, _ := s.current()
		c, err := export.Read(f.Path, raw, s.options(cfg, f.Root, a.Role))
		if err != nil {
			return fmt.Errorf("%s cannot be placed: %w", f.Path, err)
		}
		if _, err := s.store.PutContent(ctx, tx, f.ID, c, s.instrumentsOf); err != nil {
			return err
		}
		now := s.clock.Now()
		rev, err := s.store.AdoptFile(ctx, tx, f.ID, set.ID, a.Role, a.Rung, now, a.As, a.Because)
		if err != nil {
			return err
		}
		if err := s.assemble(ctx, tx, []int64{set.ID}, now); err != nil {
			return err
		}
		said = fmt.Sprintf("%s/%s is now %s%s of %s (revision %d)", f.Root, f.Path, a.Role, spaced(a.Rung), set.Key, rev)
		d := db.Deed{At: now, Actor: a.As, OSUser: osUser(), Action: actAdopt, Object: set.Key, Before: f.State + " " + f.Root + "/" + f.Path, After: a.Role + spaced(a.Rung), Because: a.Because, Program: Program()}
		return s.store.AppendDeed(ctx, tx, &d)
	})
	return said, err
}

func spaced(s string) string {
	if s == "" {
		return ""
	}
	return " " + s
}

// aside finds the one file that was set aside that a person means.
func (s *Service) aside(ctx context.Context, q db.Querier, name string) (*db.File, error) {
	if _, p, ok := strings.Cut(name, "/"); ok {
		if cfg := set(s); cfg.FolderByName(name[:strings.Index(name, "/")]) != nil {
			name = p
		}
	}
	files, err := s.store.FilesLike(ctx, q, name, 12)
	if err != nil {
		return nil, err
	}
	files = slices.DeleteFunc(files, func(f db.File) bool { return f.State != db.FileParked && f.State != db.FileRefused })
	switch len(files) {
	case 0:
		return nil, fmt.Errorf("no parked or refused file like %q: %w", name, ErrUnknownObject)
	case 1:
		return &files[0], nil
	}
	var names []string
	for _, f := range files {
		names = append(names, f.Root+"/"+f.Path)
	}
	return nil, fmt.Errorf("%q fits several files; say which: %s", name, strings.Join(names, ", "))
}

// knownSets lists the sets that a file with a mistyped name may belong to: the
// open ones, and those that the other files of the batch belong to.
func (s *Service) knownSets(ctx context.Context, tx pgx.Tx, batch []*item) ([]naming.KnownSet, error) {
	open, err := s.store.OpenSets(ctx, tx)
	if err != nil {
		return nil, err
	}
	at := map[string]int{}
	known := []naming.KnownSet{}
	of := func(name string) *naming.KnownSet {
		i, ok := at[name]
		if !ok {
			i = len(known)
			at[name], known = i, append(known, naming.KnownSet{Set: name})
		}
		return &known[i]
	}
	for _, o := range open {
		k := of(o.Name)
		k.Rungs = append(k.Rungs, o.Rungs...)
		k.Roles = slices.AppendSeq(k.Roles, maps.Keys(o.Roles))
	}
	for _, it := range batch {
		if it.matchErr != nil || it.match.Set == "" || it.match.Copy {
			continue
		}
		k := of(it.match.Set)
		if it.match.Role == naming.RoleScan {
			k.Rungs = append(k.Rungs, it.match.Rung)
		} else {
			k.Roles = append(k.Roles, it.match.Role)
		}
	}
	return known, nil
}

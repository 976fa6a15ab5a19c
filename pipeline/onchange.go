package pipeline

import (
	"maps"
	"slices"
	"sync"

	"github.com/rs/zerolog"

	"pkvigil/db"
)

// onChange logs a trouble when it begins or changes and once more when it
// ends, so that a night of a dead share is two lines and not five hundred.
type onChange struct {
	mu   sync.Mutex
	last map[string]string
	open map[string]map[string]bool // of begun: group -> what is present
}

// begun logs each thing of a group once when it is there, whatever becomes of
// its text, and again only after it was gone.
func (o *onChange) begun(log zerolog.Logger, group string, present map[string]string) {
	o.mu.Lock()
	defer o.mu.Unlock()
	now := make(map[string]bool, len(present))
	for _, what := range slices.Sorted(maps.Keys(present)) {
		if now[what] = true; !o.open[group][what] {
			log.Warn().Str("what", what).Str("group", group).Msg(present[what])
		}
	}
	if o.open == nil {
		o.open = map[string]map[string]bool{}
	}
	o.open[group] = now
}

func (o *onChange) note(log zerolog.Logger, what string, err error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	if o.last == nil {
		o.last = map[string]string{}
	}
	text := ""
	switch {
	case db.Away(err):
		// A server that goes away fails in several wordings, one after the other.
		text = "the database is away"
	case err != nil:
		text = err.Error()
	}
	was := o.last[what]
	switch {
	case text == was:
		return
	case text == "":
		log.Info().Str("was", was).Msg(what + " works again")
		delete(o.last, what)
	default:
		log.Warn().Err(err).Msg(what + " fails")
		o.last[what] = text
	}
}

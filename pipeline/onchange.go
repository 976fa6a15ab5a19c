package pipeline

import (
	"sync"

	"github.com/rs/zerolog"
)

// onChange logs a trouble when it begins or changes and once more when it
// ends, so that a night of a dead share is two lines and not five hundred.
type onChange struct {
	mu   sync.Mutex
	last map[string]string
}

func (o *onChange) note(log zerolog.Logger, what string, err error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	if o.last == nil {
		o.last = map[string]string{}
	}
	text := ""
	if err != nil {
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

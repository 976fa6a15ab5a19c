package pipeline

import (
	"context"
	"errors"
	"fmt"
	"os"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/pipeline/alert"
	"pkvigil/pipeline/alert/mail"
	"pkvigil/pipeline/alert/webhook"
	"pkvigil/pipeline/settings"
)

// tell stores a message with the reason for speaking and one delivery per
// receiver, and asks for their delivery, all in the caller's transaction. The
// key makes it impossible to say the same thing twice.
func (s *Service) tell(ctx context.Context, tx pgx.Tx, key string, c alert.Content, caseID *int64) error {
	kind, ok := alert.KindOf(c.Kind)
	if !ok {
		kind = alert.Kind{Code: c.Kind, Title: c.Kind, Tells: c.Kind}
	}
	set, _, _ := s.current()
	c.Laboratory = set.Laboratory.Name
	c.At = c.At.In(set.Zone())
	msg, err := alert.Compose(c)
	if err != nil {
		return fmt.Errorf("composing message %s: %w", key, err)
	}
	row := &db.Message{Key: key, Kind: c.Kind, CaseID: caseID, Reason: string(c.Why), Subject: msg.Subject, Text: msg.Text, HTML: msg.HTML, JSON: msg.JSON, At: c.At.UTC()}
	fresh, err := s.store.PutMessage(ctx, tx, row, sinksFor(set, kind.Tells, c.Why))
	if err != nil || !fresh {
		return err
	}
	s.log.Info().Str("kind", c.Kind).Str("why", string(c.Why)).Msg(msg.Subject)
	ids, err := s.store.DeliveriesOf(ctx, tx, row.ID)
	if err != nil {
		return err
	}
	return s.enqueueDeliveries(ctx, tx, ids)
}

// sinksFor lists who hears of a kind: persons by mail, and every webhook. An
// escalation goes to those who are told only after a time; everything else to
// those who are told at once.
func sinksFor(set *settings.Settings, tells string, why alert.Why) []string {
	var out []string
	if set.Mail.Host != "" {
		for _, p := range set.People {
			late := p.After > 0
			if p.Mail != "" && slices.Contains(p.Tells, tells) && late == (why == alert.WhyEscalated) {
				out = append(out, "mail:"+p.Mail)
			}
		}
	}
	for _, w := range set.Webhooks {
		out = append(out, "webhook:"+w.Name)
	}
	return out
}

// deliver makes one attempt at one delivery and records it. What failed for
// good is recorded as failed; what may work later makes the job come again.
func (s *Service) deliver(ctx context.Context, id int64, done func(context.Context, pgx.Tx) error) error {
	d, err := s.store.DeliveryByID(ctx, nil, id)
	if err != nil {
		return err
	}
	if d.State != "pending" {
		return s.store.InTx(ctx, func(tx pgx.Tx) error { return done(ctx, tx) })
	}
	sendErr := s.send(ctx, d)
	permanent := isPermanent(sendErr)
	text := ""
	if sendErr != nil {
		text = sendErr.Error()
	}
	s.once.note(s.log, "delivery to "+sinkKind(d.Sink), sendErr)
	err = s.store.InTx(ctx, func(tx pgx.Tx) error {
		if err := s.store.RecordDelivery(ctx, tx, id, s.clock.Now(), sendErr == nil, permanent, text); err != nil {
			return err
		}
		if sendErr == nil || permanent {
			return done(ctx, tx)
		}
		return nil
	})
	if err != nil {
		return err
	}
	if sendErr != nil && !permanent {
		return sendErr
	}
	return nil
}

func sinkKind(sink string) string {
	kind, _, _ := strings.Cut(sink, ":")
	return kind
}

func isPermanent(err error) bool {
	if e, ok := errors.AsType[*mail.Error](err); ok {
		return e.Permanent
	}
	if e, ok := errors.AsType[*webhook.Error](err); ok {
		return e.Permanent
	}
	return false
}

// send hands a message to its sink.
func (s *Service) send(ctx context.Context, d *db.Delivery) error {
	set, _, _ := s.current()
	kind, name, _ := strings.Cut(d.Sink, ":")
	switch kind {
	case "mail":
		snd, err := mailSender(set.Mail)
		if err != nil {
			return err
		}
		return snd.Send(ctx, mail.Letter{To: name, Subject: d.Message.Subject, Text: d.Message.Text, HTML: d.Message.HTML, ID: "pkvigil-" + d.Message.Key, Date: d.Message.At})
	case "webhook":
		for _, w := range set.Webhooks {
			if w.Name == name {
				snd, err := webhookSender(w)
				if err != nil {
					return err
				}
				return snd.Send(ctx, d.Message.Key, d.Message.JSON, time.Now()) // signed at the moment of sending: receivers refuse old stamps
			}
		}
	}
	return fmt.Errorf("receiver %s is no longer in the settings", d.Sink)
}

func mailSender(m settings.Mail) (*mail.Sender, error) {
	pw, err := secret("mail.password", m.PasswordEnv, m.PasswordFile)
	if err != nil {
		return nil, err
	}
	return mail.New(mail.Settings{Host: m.Host, Port: m.Port, From: m.From, User: m.User, Password: pw, TLS: m.TLS})
}

func webhookSender(w settings.Webhook) (*webhook.Sender, error) {
	key, err := secret("webhook "+w.Name+": secret", w.SecretEnv, w.SecretFile)
	if err != nil {
		return nil, err
	}
	return webhook.New(webhook.Settings{URL: w.URL, Secret: []byte(key)})
}

// secret reads a secret from the environment or a file that only its owner can read.
func secret(what, env, file string) (string, error) {
	switch {
	case env != "":
		v := os.Getenv(env)
		if v == "" {
			return "", fmt.Errorf("%s: environment variable %s is empty", what, env)
		}
		return v, nil
	case file != "":
		info, err := os.Stat(file)
		if err != nil {
			return "", fmt.Errorf("%s: %w", what, err)
		}
		if info.Mode().Perm()&0o077 != 0 {
			return "", fmt.Errorf("%s: %s can be read by others (mode %o); chmod 600 it", what, file, info.Mode().Perm())
		}
		b, err := os.ReadFile(file)
		if err != nil {
			return "", fmt.Errorf("%s: %w", what, err)
		}
		return strings.TrimSpace(string(b)), nil
	}
	return "", nil
}

// TestMessage sends a test message to every receiver and says what came of each.
func (s *Service) TestMessage(ctx context.Context) map[string]error {
	set, _, _ := s.current()
	now := s.clock.Now()
	msg, err := alert.Compose(alert.Content{Laboratory: set.Laboratory.Name, Kind: "test", Key: "test", Why: alert.WhyTest, At: now.In(set.Zone()), Sentence: "this is a test message; nothing is wrong"})
	out := map[string]error{}
	sinks := map[string]bool{}
	for _, p := range set.People {
		if p.Mail != "" && set.Mail.Host != "" {
			sinks["mail:"+p.Mail] = true
		}
	}
	for _, w := range set.Webhooks {
		sinks["webhook:"+w.Name] = true
	}
	for sink := range sinks {
		if err != nil {
			out[sink] = err
			continue
		}
		out[sink] = s.send(ctx, &db.Delivery{Sink: sink, Message: db.Message{Key: "test-" + now.Format(time.RFC3339), Subject: msg.Subject, Text: msg.Text, HTML: msg.HTML, JSON: msg.JSON, At: now}})
	}
	return out
}

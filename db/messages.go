package db

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"
)

// PutMessage stores a message and one delivery per sink, and fills in its id. A
// key that exists stores nothing: fresh is false and the id that of the stored one.
func (s *Store) PutMessage(ctx context.Context, tx pgx.Tx, m *Message, sinks []string) (fresh bool, err error) {
	err = tx.QueryRow(ctx, `insert into message (key, kind, case_id, reason, subject, text, html, json, at) values ($1, $2, $3, $4, $5, $6, $7, $8, $9)
		on conflict (key) do nothing returning id`, m.Key, m.Kind, m.CaseID, clean(m.Reason), clean(m.Subject), clean(m.Text), clean(m.HTML), rawOrNil(m.JSON), m.At).Scan(&m.ID)
	if errors.Is(err, pgx.ErrNoRows) {
		if err := tx.QueryRow(ctx, `select id from message where key = $1`, m.Key).Scan(&m.ID); err != nil {
			return false, fmt.Errorf("finding message %s: %w", m.Key, err)
		}
		return false, nil
	}
	if err != nil {
		return false, fmt.Errorf("storing message %s: %w", m.Key, err)
	}
	if sinks == nil {
		sinks = []string{}
	}
	_, err = tx.Exec(ctx, `insert into delivery (message_id, sink, state, attempts, last_error)
		select $1, k, 'pending', 0, '' from unnest($2::text[]) with ordinality u(k, i) order by i on conflict do nothing`, m.ID, sinks)
	if err != nil {
		return false, fmt.Errorf("storing the deliveries of message %s: %w", m.Key, err)
	}
	return true, nil
}

func (s *Store) deliveries(ctx context.Context, q Querier, rest string, args ...any) ([]Delivery, error) {
	rows, err := s.on(q).Query(ctx, `select d.id, d.message_id, d.sink, d.state, d.attempts, d.last_at, d.last_error,
		m.key, m.kind, m.case_id, m.reason, m.subject, m.text, m.html, m.json, m.at from delivery d join message m on m.id = d.message_id `+rest, args...)
	return collect(rows, err, "reading deliveries", func(r pgx.Rows) (Delivery, error) {
		var d Delivery
		var last *time.Time
		var raw []byte
		m := &d.Message
		err := r.Scan(&d.ID, &d.MessageID, &d.Sink, &d.State, &d.Attempts, &last, &d.LastError,
			&m.Key, &m.Kind, &m.CaseID, &m.Reason, &m.Subject, &m.Text, &m.HTML, &raw, &m.At)
		m.ID, m.At, d.LastAt = d.MessageID, m.At.UTC(), when(last)
		if raw != nil {
			m.JSON = json.RawMessage(raw)
		}
		return d, err
	})
}

// PendingDeliveries gives deliveries that are neither done nor given up, oldest first.
func (s *Store) PendingDeliveries(ctx context.Context, q Querier, limit int) ([]Delivery, error) {
	return s.deliveries(ctx, q, `where d.state = 'pending' order by d.id limit $1`, limit)
}

// DeliveryByID gives one delivery with its message; ErrNotFound when there is none.
func (s *Store) DeliveryByID(ctx context.Context, q Querier, id int64) (*Delivery, error) {
	d, err := first(s.deliveries(ctx, q, `where d.id = $1`, id))
	if err == nil && d == nil {
		return nil, fmt.Errorf("delivery %d: %w", id, ErrNotFound)
	}
	return d, err
}

// FailedDeliveries gives deliveries given up since a moment, oldest first.
func (s *Store) FailedDeliveries(ctx context.Context, q Querier, since time.Time) ([]Delivery, error) {
	return s.deliveries(ctx, q, `where d.state = 'failed' and d.last_at >= $1 order by d.id`, since)
}

// RecordDelivery adds an attempt: ok delivers, permanent gives up, neither leaves it pending. What is delivered stays so.
func (s *Store) RecordDelivery(ctx context.Context, tx pgx.Tx, deliveryID int64, at time.Time, ok, permanent bool, errText string) error {
	state := "pending"
	switch {
	case ok:
		state, errText, permanent = "delivered", "", false
	case permanent:
		state = "failed"
	}
	if !ok && errText == "" {
		errText = "no reason given"
	}
	errText = Redact(clean(errText))
	tag, err := tx.Exec(ctx, `with d as (update delivery set state = case when state = 'delivered' then state else $2 end, attempts = attempts + 1, last_at = $3,
			last_error = $4 where id = $1 returning id)
		insert into delivery_attempt (delivery_id, at, ok, permanent, error) select id, $3, $5, $6, $4 from d`, deliveryID, state, at, errText, ok, permanent)
	if err != nil {
		return fmt.Errorf("recording delivery %d: %w", deliveryID, err)
	}
	if tag.RowsAffected() == 0 {
		return fmt.Errorf("recording delivery %d: %w", deliveryID, ErrNotFound)
	}
	return nil
}

func (s *Store) said(ctx context.Context, q Querier, rest string, args ...any) ([]Said, error) {
	rows, err := s.on(q).Query(ctx, `select m.id, m.key, m.kind, m.case_id, m.reason, m.subject, m.at, m.json,
		exists (select from delivery d where d.message_id = m.id and d.state = 'delivered') from message m `+rest, args...)
	return collect(rows, err, "reading what was said", func(r pgx.Rows) (Said, error) {
		var d Said
		var raw []byte
		err := r.Scan(&d.MessageID, &d.Key, &d.Kind, &d.CaseID, &d.Reason, &d.Subject, &d.At, &raw, &d.Delivered)
		d.At = d.At.UTC()
		if raw != nil {
			d.JSON = json.RawMessage(raw)
		}
		return d, err
	})
}

// LastSaid gives the newest message about a case, nil when none.
func (s *Store) LastSaid(ctx context.Context, q Querier, caseID int64) (*Said, error) {
	return first(s.said(ctx, q, `where m.case_id = $1 order by m.at desc, m.id desc limit 1`, caseID))
}

// SaidSince gives messages since a moment, oldest first; kind "" means all.
func (s *Store) SaidSince(ctx context.Context, q Querier, kind string, since time.Time) ([]Said, error) {
	return s.said(ctx, q, `where ($1 = '' or m.kind = $1) and m.at >= $2 order by m.at, m.id`, kind, since)
}

// SaidByKey gives the message with a key, nil when none.
func (s *Store) SaidByKey(ctx context.Context, q Querier, key string) (*Said, error) {
	return first(s.said(ctx, q, `where m.key = $1`, key))
}

package main

import (
	"crypto/hmac"
	"crypto/rand"
	"encoding/hex"
	"fmt"
	"io"
	"net"
	"net/http"
	"sync"
	"time"

	"pkvigil/pipeline/alert/webhook"
)

// secretEnv is where the demo's service finds the secret it shares with the receiver.
const secretEnv = "PKVIGIL_DEMO_SECRET"

// A receiver takes the demo's messages on loopback, as a laboratory's screen
// would, and checks their signatures.
type receiver struct {
	url, secret string
	srv         *http.Server

	mu      sync.Mutex
	good    map[string]int // deliveries by id
	refused int
}

func startReceiver() (*receiver, error) {
	var key [32]byte
	if _, err := rand.Read(key[:]); err != nil {
		return nil, fmt.Errorf("making a secret: %w", err)
	}
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		return nil, fmt.Errorf("receiver of messages: %w", err)
	}
	r := &receiver{url: "http://" + l.Addr().String() + "/messages", secret: hex.EncodeToString(key[:]), good: map[string]int{}}
	r.srv = &http.Server{Handler: r, ReadTimeout: 10 * time.Second, WriteTimeout: 10 * time.Second}
	go func() { _ = r.srv.Serve(l) }() // ends with Close
	return r, nil
}

// ServeHTTP takes one message.
func (r *receiver) ServeHTTP(w http.ResponseWriter, q *http.Request) {
	body, err := io.ReadAll(io.LimitReader(q.Body, 4<<20))
	want := webhook.Sign([]byte(r.secret), q.Header.Get(webhook.HeaderTimestamp), body)
	r.mu.Lock()
	defer r.mu.Unlock()
	if err != nil || !hmac.Equal([]byte(want), []byte(q.Header.Get(webhook.HeaderSignature))) {
		r.refused++
		w.WriteHeader(http.StatusUnauthorized)
		return
	}
	r.good[q.Header.Get(webhook.HeaderDelivery)]++
	w.WriteHeader(http.StatusNoContent)
}

// counts says how many messages came, how many came more than once, and how
// many had no good signature.
func (r *receiver) counts() (messages, twice, refused int) {
	r.mu.Lock()
	defer r.mu.Unlock()
	for _, n := range r.good {
		if n > 1 {
			twice++
		}
	}
	return len(r.good), twice, r.refused
}

func (r *receiver) close() { _ = r.srv.Close() }

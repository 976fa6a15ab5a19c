// Package job declares what the queue carries: small arguments that name rows,
// never data. The database is the truth; a job says that looking is worth
// while.
package job

import "time"

// Set asks for one set to be computed. The revision makes a change that
// arrives while the set is being computed a job of its own.
type Set struct {
	SetID    int64     `json:"set_id" river:"unique"`
	Revision int       `json:"revision" river:"unique"`
	At       time.Time `json:"at"` // by the service's clock: the moment results are stamped with
}

// Kind names the job for the queue.
func (Set) Kind() string { return "set" }

// Deliver asks for one stored message to be sent to one receiver.
type Deliver struct {
	DeliveryID int64 `json:"delivery_id" river:"unique"`
}

// Kind names the job for the queue.
func (Deliver) Kind() string { return "deliver" }

// Queues separate work that waits for the network from work that computes.
const (
	QueueSets     = "sets"
	QueueMessages = "messages"
)

package alarm

import (
	"context"
	"log/slog"
	"strings"
	"sync"
	"time"
)

// Message is what goes out, as JSON, when alarms were raised.
type Message struct {
	Schema string    `json:"schema"` // gaugelog.alarm/1
	Run    string    `json:"run"`    // the run's id
	Title  string    `json:"title"`  // of the rig
	Rig    string    `json:"rig"`    // the specimen's name
	At     time.Time `json:"at"`
	Level  Level     `json:"level"` // of the gravest
	Text   string    `json:"text"`  // everything in words, for people
	Alarms []Alarm   `json:"alarms"`
}

// MessageSchema names the message's layout.
const MessageSchema = "gaugelog.alarm/1"

// NewMessage words a message about alarms raised together, gravest first.
func NewMessage(run, title, rig string, at time.Time, alarms []Alarm) Message {
	m := Message{Schema: MessageSchema, Run: run, Title: title, Rig: rig, At: at.UTC(), Alarms: alarms}
	var lines []string
	for _, a := range alarms {
		m.Level = max(m.Level, a.Level)
		subject := ""
		if a.Subject != "" {
			subject = a.Subject + ": "
		}
		lines = append(lines, strings.ToUpper(a.Level.String())+" "+title+": "+subject+a.Text+". "+a.Advice)
	}
	m.Text = strings.Join(append(lines, Safety), "\n")
	return m
}

// Messenger carries a message out of the program. It gives up when the
// context ends.
type Messenger interface {
	// Name says where the messages go, for the log; it holds no secret.
	Name() string
	// Tell returns when the message has arrived, or why it did not.
	Tell(ctx context.Context, m Message) error
}

// Outbox carries messages out behind everybody's back: each messenger has a
// queue and a goroutine of its own.
type Outbox struct {
	queues []chan Message
	all    []Messenger
	log    *slog.Logger
}

// mostQueued bounds the messages that wait for one messenger.
const mostQueued = 64

// NewOutbox prepares an outbox; Run sets it going.
func NewOutbox(log *slog.Logger, all ...Messenger) *Outbox {
	o := &Outbox{all: all, log: log}
	for range all {
		o.queues = append(o.queues, make(chan Message, mostQueued))
	}
	return o
}

// Put queues a message and returns at once. Where a queue is full the message
// is lost on that way, which is logged.
func (o *Outbox) Put(m Message) {
	for i, q := range o.queues {
		select {
		case q <- m:
		default:
			o.log.Error("an alarm message was lost: too many wait", "way", o.all[i].Name(), "text", m.Text)
		}
	}
}

// Run carries messages out until the context ends, and waits for what is on
// its way.
func (o *Outbox) Run(ctx context.Context) {
	var wait sync.WaitGroup
	for i, q := range o.queues {
		wait.Go(func() {
			for {
				select {
				case <-ctx.Done():
					return
				case m := <-q:
					if err := o.all[i].Tell(ctx, m); err != nil {
						o.log.Error("an alarm message did not arrive", "way", o.all[i].Name(), "error", err)
					}
				}
			}
		})
	}
	wait.Wait()
}

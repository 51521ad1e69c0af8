package config

import (
	"net/url"
	"path/filepath"
	"slices"
)

// AlarmCauses lists what an alarm can be raised for, gravest first.
var AlarmCauses = []string{
	"clear-area", "sag", "catcher", "span-over-sag", "caution", "load-changed", "knock",
	"travel", "silent", "frozen", "temperature", "disk", "clock", "forward",
}

// Alarms says which alarms are wanted, where their thresholds lie and who is
// told. Those of sag, span over sag, travel, catcher gap and temperature have
// their thresholds in Limits.
type Alarms struct {
	// Off names the causes that raise no alarm; see AlarmCauses.
	Off []string `mapstructure:"off"`
	// TravelWithin raises the travel alarm when a gauge runs out of travel
	// sooner than this at the last day's rate; default 7 d.
	TravelWithin Duration `mapstructure:"travel_within"`
	// FrozenAfter is how long an indication may stay the same while two other
	// gauges move; default 30 min.
	FrozenAfter Duration `mapstructure:"frozen_after"`
	// DiskFree is the free space below which the disk alarm is raised; default 500 MB.
	DiskFree Size `mapstructure:"disk_free"`
	// Command is a program and its arguments, which gets each message as JSON
	// on its standard input; empty: none.
	Command []string `mapstructure:"command"`
	// Webhook is an address that each message is posted to as JSON; empty: none.
	Webhook string `mapstructure:"webhook"`
	// WebhookTokenFile is a file whose text is sent as a bearer token; empty: none.
	WebhookTokenFile string `mapstructure:"webhook_token_file"`
}

// Wants reports whether the cause is not switched off.
func (a *Alarms) Wants(cause string) bool { return !slices.Contains(a.Off, cause) }

func (r *Rig) fillAlarms() {
	r.duration(&r.Alarms.TravelWithin, "alarms.travel_within", 7*86400)
	r.duration(&r.Alarms.FrozenAfter, "alarms.frozen_after", 1800)
	if !r.states("alarms.disk_free") {
		r.Alarms.DiskFree = Size{Quantity{Value: 500e6}}
	}
}

func (c *checker) alarms() {
	a := c.rig.Alarms
	for i, cause := range a.Off {
		path := at("alarms.off", i)
		switch {
		case !slices.Contains(AlarmCauses, cause):
			c.fail(path, "there is no alarm "+quoted(cause), nearestMend(cause, AlarmCauses))
		case cause == "clear-area":
			c.warn(path, "nobody is told when the specimen is about to fail", "leave clear-area out of off")
		}
	}
	for _, d := range []struct {
		key   string
		value Duration
	}{{"travel_within", a.TravelWithin}, {"frozen_after", a.FrozenAfter}} {
		if c.rig.states("alarms."+d.key) && d.value.Value <= 0 {
			c.fail("alarms."+d.key, d.key+" must be greater than zero", "write a time such as 7 d, or name the cause in off")
		}
	}
	if c.rig.states("alarms.disk_free") && a.DiskFree.Value < 1e6 {
		c.fail("alarms.disk_free", "disk_free must be at least 1 MB", "500 MB is usual")
	}
	if len(a.Command) > 0 && a.Command[0] == "" {
		c.fail("alarms.command", "command names no program", "write [/usr/local/bin/tell, argument], or leave it out")
	}
	c.webhook()
}

func (c *checker) webhook() {
	a := c.rig.Alarms
	if a.WebhookTokenFile != "" {
		if a.Webhook == "" {
			c.fail("alarms.webhook_token_file", "a token without a webhook to send it to", "write webhook: https://..., or leave the token out")
		}
		if !filepath.IsAbs(a.WebhookTokenFile) && a.WebhookTokenFile[0] != '/' {
			c.fail("alarms.webhook_token_file", "webhook_token_file must be an absolute path", "write it from / on, such as /etc/gaugelog/token")
		}
	}
	if a.Webhook == "" {
		return
	}
	u, err := url.Parse(a.Webhook)
	switch {
	case err != nil || u.Host == "" || u.Scheme != "http" && u.Scheme != "https":
		c.fail("alarms.webhook", quoted(a.Webhook)+" is no web address", "write the address whole, such as https://host.example/path")
	case u.User != nil:
		c.fail("alarms.webhook", "webhook holds a password, which would stand in every copy of the rig file", "put a token into a file and name it in webhook_token_file")
	case u.Scheme == "http" && a.WebhookTokenFile != "":
		c.warn("alarms.webhook", "the token travels unencrypted", "use https")
	}
}

package steps

import (
	"fmt"
	"regexp"
	"strings"
	"time"
)

// A person overrules a decision by an amendment whose path begins with
// "decisions". The grammar, TIME being an instant in RFC 3339:
//
//	decisions[disturbance TIME].kind         value: a kind of disturbance, or "none"
//	decisions[disturbance TIME GAUGE].kind   the same for that gauge's part alone
//	decisions[step NAME].found               value: TIME of first movement; NAME may be "unmarked-1"
//	decisions[step NAME].full                value: TIME of full load
//	decisions[step NAME].response            value: true | false
//	decisions[exclude GAUGE FROM TO]         value: true; GAUGE "all" for every gauge
//
// TIME picks the disturbance that begins within two minutes (or two intervals
// of readings) of it. "none" leaves the readings as they stand: no offset, no
// exclusion.
const grammar = "decisions[disturbance TIME [GAUGE]].kind, decisions[step NAME].found|full|response, decisions[exclude GAUGE FROM TO]"

// rule is one decision of a person.
type rule struct {
	what     string // disturbance | step | exclude
	field    string
	at, to   int64
	name     string // gauge or step
	value    string
	instant  int64
	used     bool
	path     string
	decision Decision
}

var rulePattern = regexp.MustCompile(`^decisions\[(disturbance|step|exclude)((?: [^ \]]+)+)\](?:\.(kind|found|full|response))?$`)

// decide reads the decisions among the amendments.
func (r *run) decide() {
	for _, a := range r.h.Amendments {
		if !strings.HasPrefix(a.Path, "decisions") {
			continue
		}
		value := a.Shown
		if value == "" {
			value = fmt.Sprint(a.Value)
		}
		value = strings.Trim(value, `"' `)
		d := Decision{Path: a.Path, Value: value, Why: a.Why, By: a.By, Since: a.Since}
		u, err := parseRule(a.Path, value)
		if err != nil {
			r.warn("decision-not-understood", -1, 0, fmt.Sprintf("amendment %s: %v; nothing was overruled (paths are %s)", a.Path, err, grammar))
			continue
		}
		u.decision = d
		r.rules = append(r.rules, u)
		r.out.Decisions = append(r.out.Decisions, d)
	}
}

func parseRule(path, value string) (rule, error) {
	m := rulePattern.FindStringSubmatch(path)
	if m == nil {
		return rule{}, fmt.Errorf("the path is none that is known")
	}
	u := rule{what: m[1], field: m[3], value: value, path: path}
	args := strings.Fields(m[2])
	var err error
	switch u.what {
	case "disturbance":
		if len(args) > 2 || u.field != "kind" {
			return u, fmt.Errorf("want decisions[disturbance TIME [GAUGE]].kind")
		}
		u.at, err = instant(args[0])
		if len(args) == 2 {
			u.name = args[1]
		}
		if err == nil && value != "none" && !knownKind(Kind(value)) {
			err = fmt.Errorf("%q is no kind of disturbance", value)
		}
	case "step":
		if len(args) != 1 || u.field == "" || u.field == "kind" {
			return u, fmt.Errorf("want decisions[step NAME].found, .full or .response")
		}
		u.name = args[0]
		if u.field == "response" {
			if value != "true" && value != "false" {
				err = fmt.Errorf("a response is true or false, not %q", value)
			}
		} else {
			u.instant, err = instant(value)
		}
	case "exclude":
		if len(args) != 3 || u.field != "" {
			return u, fmt.Errorf("want decisions[exclude GAUGE FROM TO]")
		}
		u.name = args[0]
		if u.at, err = instant(args[1]); err == nil {
			u.to, err = instant(args[2])
		}
	}
	return u, err
}

func instant(s string) (int64, error) {
	t, err := time.Parse(time.RFC3339Nano, s)
	if err != nil {
		return 0, fmt.Errorf("%q is no instant: write it as 2026-09-14T08:30:00Z", s)
	}
	return t.UnixNano(), nil
}

func knownKind(k Kind) bool {
	switch k {
	case BenchKnock, GaugeKnock, ZeroPressed, Spike, LoadChanged, SupportShift, UnitKey, Frozen, EndOfTravel, GapKind, Undecided:
		return true
	}
	return false
}

// ruling returns what a person decided about a cluster, "" for nothing.
func (r *run) ruling(c *cluster) string {
	tol := max(120*second, 2*nanos(r.spacing(c.lo)))
	for i := range r.rules {
		u := &r.rules[i]
		if u.what != "disturbance" || u.at < c.lo-tol || u.at > c.hi+tol {
			continue
		}
		if u.name != "" {
			g := r.gauge(u.name)
			if g < 0 || !c.moved[g] && c.peak[g] == 0 {
				continue
			}
		}
		u.used = true
		return u.value
	}
	return ""
}

// rulingAt returns what a person decided about a disturbance of gauge g
// without a cluster that began between two instants, "" for nothing.
func (r *run) rulingAt(g int, from, to int64) string {
	tol := max(120*second, 2*nanos(r.spacing(from)))
	for i := range r.rules {
		u := &r.rules[i]
		if u.what == "disturbance" && u.at >= from-tol && u.at <= to+tol && (u.name == "" || u.name == r.name(g)) {
			u.used = true
			return u.value
		}
	}
	return ""
}

// partRulings takes the gauges out of a cluster whose part in it a person
// decided by the gauge's name, where others moved too.
func (r *run) partRulings() {
	for i := range r.rules {
		u := &r.rules[i]
		g := r.gauge(u.name)
		if u.what != "disturbance" || g < 0 {
			continue
		}
		for j := range r.events {
			e := &r.events[j]
			tol := max(120*second, 2*nanos(r.spacing(e.lo)))
			if e.taken || !e.moved[g] || len(e.movedGauges()) < 2 || u.at < e.lo-tol || u.at > e.hi+tol {
				continue
			}
			u.used = true
			if u.value == "none" {
				e.without(g)
			} else {
				r.act(e, g, Disturbance{Kind: Kind(u.value), Evidence: decided + fmt.Sprintf("%s moved", r.names(e.movedGauges()))})
			}
			break
		}
	}
}

func (r *run) gauge(name string) int {
	for i := range r.h.Rig.Gauges {
		if r.h.Rig.Gauges[i].Name == name {
			return i
		}
	}
	return -1
}

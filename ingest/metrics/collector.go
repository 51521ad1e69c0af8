package metrics

import (
	"net/http"
	"time"

	"github.com/prometheus/client_golang/prometheus"
	"github.com/prometheus/client_golang/prometheus/collectors"
	"github.com/prometheus/client_golang/prometheus/promhttp"

	"gaugelog/ingest/desk"
	"gaugelog/ingest/forward"
)

func describe(name, help string, labels ...string) *prometheus.Desc {
	return prometheus.NewDesc("gaugelog_"+name, help, append([]string{"rig"}, labels...), nil)
}

var (
	gaugeAge      = describe("instrument_reading_age_seconds", "Age of the last reading of a gauge or probe.", "gauge")
	gaugeShows    = describe("instrument_indication_meters", "Last indication of a gauge, as recorded and uncorrected.", "gauge")
	gaugeSilent   = describe("instrument_silent", "1 where a gauge or probe has said nothing for longer than it may.", "gauge")
	gaugeTravel   = describe("instrument_travel_left_meters", "How far a gauge can still follow the beam downwards.", "gauge")
	probeCelsius  = describe("probe_temperature_celsius", "Last temperature of a probe.", "probe")
	probeHumidity = describe("probe_humidity_ratio", "Last relative humidity of a probe, 0 to 1.", "probe")
	portOpen      = describe("port_open", "1 while a port is open.", "port")
	portFrames    = describe("port_frames_total", "Frames that counted.", "port")
	portRejects   = describe("port_rejected_frames_total", "Frames refused because they were damaged.", "port")
	portReconnect = describe("port_reconnects_total", "Times a port was opened again.", "port")
	portBytes     = describe("port_received_bytes_total", "Bytes received.", "port")
	diskFree      = describe("disk_free_bytes", "Free space on the run folder's disk.")
	diskFault     = describe("disk_fault", "1 while something is wrong with the disk.")
	syncAge       = describe("sync_age_seconds", "Age of the last completed sync: what a power cut now would cost.")
	queueLength   = describe("queue_readings", "Readings between the ports and the recorder.")
	waiting       = describe("waiting_readings", "Readings in memory that are not yet on disk.")
	stored        = describe("stored_readings_total", "Readings taken for the disk since the start.")
	dropped       = describe("dropped_readings_total", "Readings lost for want of room since the start.")
	clockSynced   = describe("clock_synchronized", "1 where a time source keeps the wall clock.")
	alarms        = describe("alarms", "Raised alarms by cause.", "cause", "level")
	sendBehind    = describe("forward_segments_behind", "Segments of which something is still to be sent to the server.")
	sendAge       = describe("forward_newest_age_seconds", "Age of the newest reading that the server took since the start.")
	sendLines     = describe("forward_sent_lines_total", "Lines that the server took, those sent again counted again.")
	sendRefused   = describe("forward_refused_lines_total", "Lines that the server refused and that were set aside.")
	sendHeldBack  = describe("forward_unset_readings_total", "Readings kept back until their clock is known.")
	sendRetries   = describe("forward_retries_total", "Times that the sending waited to try again.")
	sendHeld      = describe("forward_held", "1 while the sending waits for a person: the server refuses access.")
	all           = []*prometheus.Desc{gaugeAge, gaugeShows, gaugeSilent, gaugeTravel, probeCelsius, probeHumidity, portOpen, portFrames,
		portRejects, portReconnect, portBytes, diskFree, diskFault, syncAge, queueLength, waiting, stored, dropped, clockSynced, alarms,
		sendBehind, sendAge, sendLines, sendRefused, sendHeldBack, sendRetries, sendHeld}
)

// Collector reads the desks when it is asked.
type Collector struct{ desks []*desk.Desk }

// NewCollector makes a collector over desks with different names.
func NewCollector(desks ...*desk.Desk) *Collector { return &Collector{desks} }

// Describe lists the metrics.
func (c *Collector) Describe(out chan<- *prometheus.Desc) {
	for _, d := range all {
		out <- d
	}
}

// Collect gives the metrics of this moment.
func (c *Collector) Collect(out chan<- prometheus.Metric) {
	for _, d := range c.desks {
		e := emitter{out, d.Name()}
		s := d.Snapshot()
		e.instruments(s)
		for _, p := range s.Ports {
			e.gauge(portOpen, truth(p.Open), p.Port)
			e.counter(portFrames, p.Frames, p.Port)
			e.counter(portRejects, p.Refused, p.Port)
			e.counter(portReconnect, p.Reconnects, p.Port)
			e.counter(portBytes, p.Bytes, p.Port)
		}
		if s.Status.DiskFree >= 0 {
			e.gauge(diskFree, float64(s.Status.DiskFree))
		}
		e.gauge(diskFault, truth(s.Status.Fault != ""))
		e.gauge(syncAge, s.Status.SyncAge.Seconds())
		e.gauge(queueLength, float64(s.Queued))
		e.gauge(waiting, float64(s.Status.Waiting))
		e.counter(stored, s.Status.Stored)
		e.counter(dropped, s.Status.Dropped)
		e.gauge(clockSynced, truth(s.Status.ClockSynchronised))
		if s.Forward != nil {
			e.forward(s.At, s.Forward)
		}
		count := map[[2]string]int{}
		for _, a := range s.Alarms {
			count[[2]string{a.Cause, a.Level.String()}]++
		}
		for k, n := range count {
			e.gauge(alarms, float64(n), k[0], k[1])
		}
	}
}

// emitter writes the metrics of one rig.
type emitter struct {
	out chan<- prometheus.Metric
	rig string
}

func (e emitter) gauge(d *prometheus.Desc, v float64, labels ...string) {
	e.out <- prometheus.MustNewConstMetric(d, prometheus.GaugeValue, v, append([]string{e.rig}, labels...)...)
}

func (e emitter) counter(d *prometheus.Desc, n int64, labels ...string) {
	e.out <- prometheus.MustNewConstMetric(d, prometheus.CounterValue, float64(n), append([]string{e.rig}, labels...)...)
}

func (e emitter) forward(now time.Time, f *forward.State) {
	e.gauge(sendBehind, float64(f.Segments))
	if f.Newest != 0 {
		e.gauge(sendAge, max(0, now.Sub(time.Unix(0, f.Newest)).Seconds()))
	}
	e.counter(sendLines, f.Sent)
	e.counter(sendRefused, f.Refused)
	e.counter(sendHeldBack, f.Count.Held)
	e.counter(sendRetries, f.Retries)
	e.gauge(sendHeld, truth(f.Held))
}

func (e emitter) instruments(s *desk.Snapshot) {
	since := time.Duration(s.At.UnixNano() - s.Status.At.Wall)
	for _, l := range s.Status.Last {
		e.gauge(gaugeSilent, truth(l.Silent), l.Name)
		if l.Seen {
			e.gauge(gaugeAge, max(0, l.Age+since).Seconds(), l.Name)
		}
	}
	for _, g := range s.Gauges {
		if g.Seen {
			e.gauge(gaugeShows, g.MM/1000, g.Name)
		}
		if g.TravelLeft != nil {
			e.gauge(gaugeTravel, *g.TravelLeft/1000, g.Name)
		}
	}
	for _, p := range s.Probes {
		if p.Seen && p.Celsius == p.Celsius { // not NaN
			e.gauge(probeCelsius, p.Celsius, p.Name)
		}
		if p.Seen && p.HumidityPercent == p.HumidityPercent {
			e.gauge(probeHumidity, p.HumidityPercent/100, p.Name)
		}
	}
}

func truth(b bool) float64 {
	if b {
		return 1
	}
	return 0
}

// Handler answers scrapes with the desks' metrics and the process's own;
// syncs may be nil.
func Handler(syncs *Syncs, desks ...*desk.Desk) http.Handler {
	r := prometheus.NewRegistry()
	if syncs != nil {
		r.MustRegister(syncs.durations)
	}
	r.MustRegister(NewCollector(desks...), collectors.NewGoCollector(), collectors.NewProcessCollector(collectors.ProcessCollectorOpts{}))
	return promhttp.HandlerFor(r, promhttp.HandlerOpts{MaxRequestsInFlight: 2, Timeout: 5 * time.Second})
}

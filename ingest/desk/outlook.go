package desk

import (
	"context"
	"fmt"
	"time"
)

// Outlook is what the analysis says of a run that is still being recorded.
// Lengths are in mm, instants in ns since 1970 UTC with 0 for none; a nil
// pointer is a figure that this run cannot give.
type Outlook struct {
	// At is the last reading it knows of.
	At int64
	// Gauge and Step are those of the creep figures; empty where there are none.
	Gauge, Step string
	// StepFull is the instant of full load of the present step, as found in
	// the readings.
	StepFull int64
	// Sag is the corrected sag at the end, by gauge: net of support movement
	// and of disturbances.
	Sag []NetSag
	// Rate is the creep rate at the end, mm/d, with its standard uncertainty.
	Rate, RateU *float64
	// Stage is primary, secondary or tertiary; empty where it cannot be told.
	Stage        string
	Forecasts    []Forecast
	MayStop      []MayStop
	Disturbances []Disturbance
	// Caution and ClearArea are when the analysis first asked for caution, or
	// for the area to be cleared, because the sag accelerates.
	Caution, ClearArea int64
}

// NetSag is one gauge's corrected sag.
type NetSag struct {
	Gauge string
	MM    float64
	U     *float64 // standard uncertainty, mm
}

// Forecast is the creep gauge's sag at a time after full load.
type Forecast struct {
	After  string // as the rig file writes it, such as 10 d
	At     int64
	MM     float64
	Lo, Hi *float64 // 95 % band
	// Label is plain, caution, informative or refused; Refused says why.
	Label, Refused string
}

// MayStop is what more time would buy: the width of the 95 % band of the
// farthest forecast after testing More longer.
type MayStop struct {
	More    time.Duration
	WidthMM float64
}

// Disturbance is something that moved a gauge and was neither planned load nor
// creep. Kind is one of the result's kinds, such as bench-knock.
type Disturbance struct {
	Kind     string
	Gauges   []string
	From, To int64
	Size     *float64 // mm, its own effect on the apparent sag
	Load     *float64 // N
	Treated  string   // in words
}

// Analyse evaluates what is on disk of the run. It may take long, and ends
// early with the context's error where it can.
type Analyse func(ctx context.Context) (*Outlook, error)

// Figures of the analysis beside the recording.
const (
	analyseEvery = time.Minute
	analyseShare = 10 // of the time, at most one in this many parts
)

type outlookResult struct {
	outlook *Outlook
	err     error
	at      time.Time
}

// watchOutlook runs the analysis again and again until the context ends.
func (d *Desk) watchOutlook(ctx context.Context) {
	wait := d.o.AnalyseFirst
	for {
		timer := time.NewTimer(wait)
		select {
		case <-ctx.Done():
			timer.Stop()
			return
		case <-timer.C:
		}
		began := time.Now()
		outlook, err := d.analyse(ctx)
		wait = max(analyseEvery, analyseShare*time.Since(began))
		select {
		case d.outlooks <- outlookResult{outlook, err, time.Now()}:
		case <-ctx.Done():
			return
		}
	}
}

// analyse calls the plugged analysis. A panic in it must not end a recording
// of months: it becomes an error that the page shows.
func (d *Desk) analyse(ctx context.Context) (o *Outlook, err error) {
	defer func() {
		if p := recover(); p != nil {
			o, err = nil, fmt.Errorf("the analysis failed: %v", p)
			d.o.Log.Error("the analysis beside the recording failed", "panic", p)
		}
	}()
	return d.o.Analyse(ctx)
}

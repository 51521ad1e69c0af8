package live

import (
	"bytes"
	"html/template"
	"net/http"
	"regexp"
	"sync"

	"gaugelog/ingest/answer"
	"gaugelog/ingest/desk"
)

// sections are the parts of a page that change, in their order on it.
var sections = []string{"banner", "alive", "knocked", "travel", "yesterday", "speed", "load", "plots", "outlook", "gauges", "room", "alarms", "machine", "steps", "marks"}

// page renders one run. What it rendered from a snapshot is kept while that is
// the latest, so that any number of people cost what one costs.
type page struct {
	desk *desk.Desk
	once *onceOnly

	mu     sync.Mutex
	from   *desk.Snapshot
	parts  [2]map[string]template.HTML // for strangers, and for who has the token
	drawn  *desk.Curves
	marked int
	plots  template.HTML
}

func newPage(d *desk.Desk) *page { return &page{desk: d, once: newOnceOnly()} }

func (p *page) path() string { return "/r/" + p.desk.Name() + "/" }

// sectionView is what the sections are rendered from.
type sectionView struct {
	answer.View
	Known bool
	Path  string
	Plots template.HTML
}

// view is what the whole page is rendered from.
type view struct {
	Title, Specimen, Path string
	Parts                 map[string]template.HTML
	Known                 bool
	Done                  string
	Forms                 formView
}

// show renders the whole page.
func (s *Server) show(w http.ResponseWriter, r *http.Request, p *page) {
	known := s.guard.known(r)
	parts, err := p.render(known)
	if err != nil {
		s.o.Log.Error("the page could not be rendered", "error", err)
		http.Error(w, "the page could not be rendered; see the log", http.StatusInternalServerError)
		return
	}
	rig := p.desk.Rig()
	s.render(w, http.StatusOK, "page", view{
		Title: answer.TitleOf(p.desk), Specimen: rig.Specimen.Name, Path: p.path(), Parts: parts, Known: known,
		Done: doneText(r.URL.Query().Get("done")), Forms: formsOf(p.desk, p.desk.Snapshot()),
	})
}

var markID = regexp.MustCompile(`^m[0-9]{1,9}$`)

// doneText words what was just entered; an id that is none says nothing.
func doneText(id string) string {
	switch {
	case id == "withdrawn":
		return "The mark is withdrawn. It stays in the file, with the reason, and does not count."
	case id == "seen":
		return "The alarm is noted as seen."
	case markID.MatchString(id):
		return "Entered as mark " + id + ", and on disk."
	}
	return ""
}

// render gives all sections of the latest snapshot.
func (p *page) render(known bool) (map[string]template.HTML, error) {
	s := p.desk.Snapshot()
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.from != s {
		p.from, p.parts = s, [2]map[string]template.HTML{}
	}
	if p.drawn != s.Curves || p.marked != len(s.Marks) || p.plots == "" {
		p.drawn, p.marked, p.plots = s.Curves, len(s.Marks), plotsOf(p.desk, s)
	}
	i := 0
	if known {
		i = 1
	}
	if p.parts[i] != nil {
		return p.parts[i], nil
	}
	v := sectionView{answer.Of(p.desk, s), known, p.path(), p.plots}
	parts := map[string]template.HTML{}
	for _, id := range sections {
		var b bytes.Buffer
		if err := templates.ExecuteTemplate(&b, id, v); err != nil {
			return nil, err
		}
		parts[id] = template.HTML(b.String()) // made by a template of ours just now
	}
	p.parts[i] = parts
	return parts, nil
}

// changes gives the sections that differ from those sent last, and notes them.
func (p *page) changes(last map[string]string, known bool) []change {
	parts, err := p.render(known)
	if err != nil {
		return nil
	}
	out := []change{}
	for _, id := range sections {
		if html := string(parts[id]); last[id] != html {
			last[id] = html
			out = append(out, change{id, html})
		}
	}
	return out
}

// brief is a run in the list of runs.
type brief struct {
	Path, Title   string
	Banner, Alive answer.Answer
}

func (p *page) brief() brief {
	banner, alive := answer.Brief(p.desk)
	return brief{p.path(), answer.TitleOf(p.desk), banner, alive}
}

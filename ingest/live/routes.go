package live

import (
	"bytes"
	"embed"
	"html/template"
	"net/http"
	"regexp"
)

//go:embed page.html page.css page.js
var assets embed.FS

var templates = template.Must(template.New("").ParseFS(assets, "page.html"))

func (s *Server) handler() http.Handler {
	mux := http.NewServeMux()
	mux.HandleFunc("GET /{$}", s.front)
	mux.HandleFunc("GET /page.css", asset("page.css", "text/css; charset=utf-8"))
	mux.HandleFunc("GET /page.js", asset("page.js", "text/javascript; charset=utf-8"))
	mux.HandleFunc("GET /favicon.ico", func(w http.ResponseWriter, _ *http.Request) { w.WriteHeader(http.StatusNoContent) })
	mux.HandleFunc("POST /enter", s.enter)
	mux.HandleFunc("POST /leave", s.leave)
	mux.HandleFunc("GET /r/{rig}/{$}", s.looking(s.show))
	mux.HandleFunc("GET /r/{rig}/stream", s.looking(s.stream))
	mux.HandleFunc("GET /r/{rig}/follow", s.looking(s.follow))
	mux.HandleFunc("POST /r/{rig}/ask", s.acting(s.ask))
	mux.HandleFunc("POST /r/{rig}/mark", s.acting(s.mark))
	mux.HandleFunc("POST /r/{rig}/seen", s.acting(s.seen))
	if s.o.Metrics != nil {
		mux.HandleFunc("GET /metrics", func(w http.ResponseWriter, r *http.Request) {
			if s.o.Open && !s.guard.known(r) {
				w.Header().Set("WWW-Authenticate", "Bearer")
				http.Error(w, "the token is needed", http.StatusUnauthorized)
				return
			}
			s.o.Metrics.ServeHTTP(w, r)
		})
	}
	return s.guard.wrap(mux)
}

func asset(name, kind string) http.HandlerFunc {
	b, err := assets.ReadFile(name)
	if err != nil {
		panic("live: " + err.Error())
	}
	return func(w http.ResponseWriter, _ *http.Request) {
		w.Header().Set("Content-Type", kind)
		w.Header().Set("Cache-Control", "no-cache")
		_, _ = w.Write(b)
	}
}

// render sends a template's output whole or not at all.
func (s *Server) render(w http.ResponseWriter, code int, name string, data any) {
	var b bytes.Buffer
	if err := templates.ExecuteTemplate(&b, name, data); err != nil {
		s.o.Log.Error("a page could not be rendered", "page", name, "error", err)
		http.Error(w, "the page could not be rendered; see the log", http.StatusInternalServerError)
		return
	}
	w.Header().Set("Content-Type", "text/html; charset=utf-8")
	w.WriteHeader(code)
	_, _ = w.Write(b.Bytes())
}

// front is the first page: the run, or the list of runs where there are several.
func (s *Server) front(w http.ResponseWriter, r *http.Request) {
	if s.o.Open && !s.guard.known(r) {
		s.render(w, http.StatusUnauthorized, "door", doorView{})
		return
	}
	if len(s.o.Desks) == 1 {
		http.Redirect(w, r, "/r/"+s.o.Desks[0].Name()+"/", http.StatusFound)
		return
	}
	var v listView
	for _, d := range s.o.Desks {
		v.Runs = append(v.Runs, s.pages[d.Name()].brief())
	}
	s.render(w, http.StatusOK, "list", v)
}

// looking finds the run and, where the page is open to other machines, asks
// for the token.
func (s *Server) looking(next func(http.ResponseWriter, *http.Request, *page)) http.HandlerFunc {
	return func(w http.ResponseWriter, r *http.Request) {
		if s.o.Open && !s.guard.known(r) {
			s.render(w, http.StatusUnauthorized, "door", doorView{})
			return
		}
		p, ok := s.pages[r.PathValue("rig")]
		if !ok {
			http.NotFound(w, r)
			return
		}
		next(w, r, p)
	}
}

// acting is looking for what changes something: the token is always needed.
func (s *Server) acting(next func(http.ResponseWriter, *http.Request, *page)) http.HandlerFunc {
	return s.looking(func(w http.ResponseWriter, r *http.Request, p *page) {
		if !s.guard.known(r) {
			s.render(w, http.StatusForbidden, "door", doorView{Back: p.path(), Words: "Entering anything needs the token."})
			return
		}
		if err := r.ParseForm(); err != nil {
			http.Error(w, "the form cannot be read", http.StatusBadRequest)
			return
		}
		next(w, r, p)
	})
}

var runPath = regexp.MustCompile(`^/r/[a-z0-9][a-z0-9_-]*/$`)

// enter takes the token and gives the cookie.
func (s *Server) enter(w http.ResponseWriter, r *http.Request) {
	if err := r.ParseForm(); err != nil {
		http.Error(w, "the form cannot be read", http.StatusBadRequest)
		return
	}
	back := r.PostForm.Get("back")
	if !runPath.MatchString(back) {
		back = "/"
	}
	if !s.guard.right(r.PostForm.Get("token")) {
		s.o.Log.Warn("a wrong token was given on the page", "from", r.RemoteAddr)
		s.render(w, http.StatusForbidden, "door", doorView{Back: back, Words: "That is not the token."})
		return
	}
	s.guard.admit(w)
	http.Redirect(w, r, back, http.StatusSeeOther)
}

func (s *Server) leave(w http.ResponseWriter, r *http.Request) {
	s.guard.dismiss(w)
	http.Redirect(w, r, "/", http.StatusSeeOther)
}

type doorView struct{ Back, Words string }

type listView struct{ Runs []brief }

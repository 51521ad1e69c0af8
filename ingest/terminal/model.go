package terminal

import (
	"context"
	"strings"
	"time"

	tea "charm.land/bubbletea/v2"
)

// Model is the terminal view: what was received last, and what a person chose.
type Model struct {
	frame         Frame
	failed        error
	width, height int
	page          page
	// gauge and alarm count presses of n; even is 1 where the time axis is
	// even and 0 where it is logarithmic.
	gauge, alarm, even int
	// full shows all that the answers say; partly is true where some of it
	// found no room.
	full, partly bool
	scroll       int
	said         string
	by           string
	ascii        bool
	see          func(id int, by string) error
}

// frameMsg brings a frame; endMsg the source's end; seenMsg the answer to s.
type (
	frameMsg Frame
	endMsg   struct{ err error }
	seenMsg  struct {
		cause string
		err   error
	}
)

// seeWithin bounds the time that marking an alarm as seen may take.
const seeWithin = 15 * time.Second

func newModel(ctx context.Context, s Source, o Options) *Model {
	return &Model{by: o.By, ascii: o.ASCII, width: 80, height: 24, see: func(id int, by string) error {
		ctx, stop := context.WithTimeout(ctx, seeWithin)
		defer stop()
		return s.See(ctx, id, by)
	}}
}

// Init has nothing to begin: frames are sent to the program.
func (m *Model) Init() tea.Cmd { return nil }

// Update takes a key, a size or a frame.
func (m *Model) Update(msg tea.Msg) (tea.Model, tea.Cmd) {
	switch msg := msg.(type) {
	case tea.WindowSizeMsg:
		m.width, m.height, m.scroll = max(1, msg.Width), max(1, msg.Height), 0
	case frameMsg:
		m.frame = Frame(msg)
	case endMsg:
		m.failed = msg.err
		return m, tea.Quit
	case seenMsg:
		if m.said = "Noted as seen: " + msg.cause + "."; msg.err != nil {
			m.said = "Not noted as seen: " + clean(msg.err.Error()) + "."
		}
	case tea.KeyPressMsg:
		m.said = ""
		return m, m.press(msg.String())
	}
	return m, nil
}

// press does what a key asks for.
func (m *Model) press(key string) tea.Cmd {
	switch key {
	case "q", "ctrl+c":
		return tea.Quit
	case "right", "tab":
		m.turn((m.page + 1) % pages)
	case "left", "shift+tab":
		m.turn((m.page + pages - 1) % pages)
	case "up":
		m.scroll = max(0, m.scroll-1)
	case "down":
		m.scroll++
	case "pgup":
		m.scroll = max(0, m.scroll-m.height/2)
	case "pgdown", "space":
		m.scroll += m.height / 2
	case "home":
		m.scroll = 0
	case "n":
		if m.page == alarms {
			m.alarm++
		} else {
			m.gauge++
		}
	case "t":
		m.even = 1 - m.even
	case "d":
		m.full = !m.full
	case "s":
		return m.markSeen()
	}
	for i, name := range pageNames {
		if key == name[:1] {
			m.turn(page(i))
		}
	}
	return nil
}

func (m *Model) turn(to page) { m.page, m.scroll = to, 0 }

// markSeen notes the alarm chosen on the page of alarms as seen.
func (m *Model) markSeen() tea.Cmd {
	all := m.frame.View.Alarms
	if m.page != alarms || len(all) == 0 {
		return nil
	}
	a := all[m.alarm%len(all)]
	return func() tea.Msg { return seenMsg{strings.TrimSpace(a.Cause), m.see(a.ID, m.by)} }
}

// View draws the screen.
func (m *Model) View() tea.View {
	v := tea.NewView(m.screen())
	v.AltScreen = true
	v.WindowTitle = clean("gaugelog: " + m.frame.View.Title)
	return v
}

// screen is all rows, exactly as many as the terminal has.
func (m *Model) screen() string {
	head, foot := m.header(), m.keys()
	height := m.height - len(head) - len(foot)
	if height < 3 { // hardly a terminal: the answers alone
		head, foot, height = nil, nil, m.height
	}
	body := m.body(height)
	if again := m.keys(); len(again) == len(foot) {
		foot = again // what found no room is known now
	}
	m.scroll = min(m.scroll, max(0, len(body)-height))
	body = body[m.scroll:]
	if more := len(body) - height; more > 0 {
		body = body[:height]
		body[height-1] = row{{"… more below: ↓", quiet}}
	}
	for len(body) < height {
		body = append(body, row{})
	}
	var lines []string
	for _, r := range append(append(head, body...), foot...) {
		lines = append(lines, m.line(r))
	}
	return strings.Join(lines, "\n")
}

func (m *Model) line(r row) string {
	if r.width() > m.width {
		r = r.padded(m.width)
	}
	if m.ascii {
		plain := row{}
		for _, p := range r {
			plain = append(plain, piece{ascii(p.text), p.role})
		}
		r = plain
	}
	return r.text()
}

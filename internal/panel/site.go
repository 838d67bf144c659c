package panel

import (
	"bytes"
	"context"
	"log/slog"
	"net/http"
	"net/url"
	"slices"
	"strings"
	"time"

	"lapwing/internal/wire"
)

// sheet is one page with what it shows. What a page does not need stays empty.
type sheet struct {
	view
	Page, Title string
	Nav         []link

	Throw   string // cylinder
	Turn    int64
	Looks   []picture
	NoLook  string
	Numbers *numberTable
	Against string
	Record  *wire.TurnThrow

	Subject string // findings
	Found   []wire.Finding
	Why     *wire.Why
	Blocks  []wire.WhyBlock
	WhyNot  string

	Points      []point // journal
	Normal      []point
	Entries     []wire.Entry
	Ask         wire.JournalFilter
	AskSeverity string
	Severities  []string
	Next        string
	Trouble     string

	Channel       string // channel
	Chan          *wire.Channel
	Sig           *signalWords
	ChannelCharts []picture
}

type link struct {
	Href, Name string
	Here       bool
}

// picture is one chart on a page.
type picture struct{ Kind, Name, Alt string }

// point is an alarm point on the journal's page.
type point struct {
	wire.Point
	Shown   string // colour class
	Tag     string // severity, or state where it has none
	InWords string
	Why     string
	Acts    []act
}

// site draws the pages.
type site struct {
	src  Source
	look *looking // nil: the source makes no pictures
	seen *newest
	log  *slog.Logger
}

func (s *site) routes(mux router) {
	mux.HandleFunc("GET /{$}", s.page("machine", "Machine", nil))
	mux.HandleFunc("GET /findings", s.page("findings", "Findings", s.findings))
	mux.HandleFunc("GET /journal", s.page("journal", "Journal", s.journal))
	mux.HandleFunc("GET /tape", s.page("tape", "Tape", nil))
	mux.HandleFunc("GET /channels", s.page("channels", "Channels", nil))
	if s.look != nil {
		mux.HandleFunc("GET /cylinder/{throw}", s.page("cylinder", "Cylinder", s.cylinder))
		mux.HandleFunc("GET /channels/{channel}", s.page("channel", "Channel", s.channel))
	}
	mux.HandleFunc("GET /app.css", s.file("pages/app.css", "text/css; charset=utf-8"))
	mux.HandleFunc("GET /app.js", s.file("pages/app.js", "text/javascript; charset=utf-8"))
}

func (s *site) file(name, kind string) http.HandlerFunc {
	raw, err := files.ReadFile(name)
	if err != nil {
		panic(err) // it is built in
	}
	return func(w http.ResponseWriter, r *http.Request) {
		w.Header().Set("Content-Type", kind)
		_, _ = w.Write(raw)
	}
}

// page draws one page; fill adds what only this one shows, and gives a status other than 0 when there is no such page.
func (s *site) page(name, title string, fill func(r *http.Request, p *sheet) (status int)) http.HandlerFunc {
	t := pages[name]
	return func(w http.ResponseWriter, r *http.Request) {
		n := s.src.Now()
		p := &sheet{view: arrange(n, s.seen.age(n, time.Now())), Page: name, Title: title}
		p.hidden(s.src.Alarms().Points)
		if fill != nil {
			if status := fill(r, p); status != 0 {
				http.Error(w, "there is no such page", status)
				return
			}
		}
		p.Nav = s.nav(p)
		var b bytes.Buffer
		if err := t.ExecuteTemplate(&b, "layout", p); err != nil {
			s.log.Error("panel: page", "page", name, "err", err)
			http.Error(w, "the page could not be drawn; see the log", http.StatusInternalServerError)
			return
		}
		w.Header().Set("Content-Type", "text/html; charset=utf-8")
		_, _ = w.Write(b.Bytes())
	}
}

func (s *site) nav(p *sheet) []link {
	out := []link{{"/", "Machine", p.Page == "machine"}}
	if s.look != nil {
		for _, t := range s.look.pics.src.Throws() {
			out = append(out, link{"/cylinder/" + url.PathEscape(t.ID), "Throw " + t.ID, p.Throw == t.ID})
		}
	}
	return append(out, link{"/findings", "Findings", p.Page == "findings"}, link{"/journal", "Journal", p.Page == "journal"},
		link{"/tape", "Tape", p.Page == "tape"}, link{"/channels", "Channels", p.Page == "channels" || p.Page == "channel"})
}

var pictureNames = map[string]picture{
	"angle": {"angle", "Pressure and vibration over crank angle", "pressure of both ends over crank angle, the valves' windows below, and each accelerometer on the same angles; the tables give the numbers"},
	"pv":    {"pv", "Pressure over volume", "pressure over volume of both ends"},
	"logpv": {"logpv", "Log pressure over log volume", "logarithm of pressure over logarithm of volume with the line fitted to each closed stroke"},
	"load":  {"load", "Rod load", "gas load and load at the crosshead pin over crank angle with the rated limits"},
}

func (s *site) cylinder(r *http.Request, p *sheet) int {
	p.Throw = r.PathValue("throw")
	if !s.look.knows(p.Throw) {
		return http.StatusNotFound
	}
	p.Title = "Throw " + p.Throw
	turn, err := turnOf(r.URL.Query().Get("turn"))
	if err != nil {
		return http.StatusNotFound
	}
	l, err := s.look.pics.look(r.Context(), p.Throw, turn)
	if err != nil {
		p.NoLook = strings.ToUpper(err.Error()[:1]) + err.Error()[1:] + "."
	} else {
		p.Turn, p.Against, p.Record = l.Turn, l.Against, l.Record
		for _, k := range kinds {
			if k != "load" || l.Picture.Load != nil {
				p.Looks = append(p.Looks, pictureNames[k])
			}
		}
		p.Numbers = tabulate(l)
	}
	return 0
}

func (s *site) findings(r *http.Request, p *sheet) int {
	p.Subject = r.URL.Query().Get("subject")
	for _, f := range p.Findings {
		if wire.Within(f.Subject, p.Subject) {
			p.Found = append(p.Found, f)
		}
	}
	if p.Subject == "" {
		return 0
	}
	if len(p.Subject) > 200 {
		return http.StatusNotFound
	}
	ctx, cancel := context.WithTimeout(r.Context(), orderWait)
	defer cancel()
	w, err := s.src.Why(ctx, p.Subject, 0)
	if err != nil {
		p.WhyNot = "How it was weighed cannot be told now: the line is busy or has ended."
		return 0
	}
	p.Why = &w
	if n := len(w.Blocks); n > 0 {
		p.Blocks = w.Blocks[n-1:]
	}
	return 0
}

func (s *site) journal(r *http.Request, p *sheet) int {
	q := r.URL.Query()
	p.Severities, p.AskSeverity = []string{"advisory", "alert", "danger"}, q.Get("severity")
	for _, k := range s.src.Alarms().Points {
		pt := point{Point: k, Shown: tone(k.Severity), Tag: k.Severity, InWords: stateInWords(k.State), Acts: actsFor(k.State)}
		if pt.Shown == "mute" {
			pt.Tag = strings.ReplaceAll(k.State, "-", " ")
		}
		switch {
		case k.Shelf != nil:
			pt.Why = "by " + k.Shelf.By + " until " + clock(k.Shelf.Until) + ": " + k.Shelf.Reason
		case k.Out != nil:
			pt.Why = "by " + k.Out.By + ": " + k.Out.Reason
		case k.ByDesign != "":
			pt.Why = k.ByDesign
		}
		if k.Behind != "" {
			pt.InWords += " (behind it: " + stateInWords(k.Behind) + ")"
		}
		if k.State == "normal" || k.State == "unknown" {
			p.Normal = append(p.Normal, pt)
		} else {
			p.Points = append(p.Points, pt)
		}
	}
	slices.SortStableFunc(p.Points, func(a, b point) int { return ranks[b.Severity] - ranks[a.Severity] })
	f, err := wire.ParseJournalFilter(q)
	if err != nil {
		p.Trouble = err.Error()
		f = wire.JournalFilter{Limit: 100}
	}
	page, err := s.src.Journal(f)
	if err != nil {
		p.Trouble = "The journal could not be read."
	}
	if page.Unread != "" {
		p.Trouble = page.Unread
	}
	p.Ask, p.Entries = f, page.Entries
	if page.Next != "" {
		f.Page = page.Next
		p.Next = "/journal?" + f.Query().Encode()
	}
	return 0
}

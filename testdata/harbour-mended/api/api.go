// Package api serves the harbour over HTTP.
package api

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"net/http"
	"path/filepath"
	"strconv"
	"sync"
	"time"

	"example/harbour/berth"
	"example/harbour/booking"
	"example/harbour/config"
	"example/harbour/crew"
	"example/harbour/depot"
	"example/harbour/lease"
	"example/harbour/logbook"
	"example/harbour/manifest"
	"example/harbour/meter"
	"example/harbour/tide"
)

// A Harbour is all that the handlers work with.
type Harbour struct {
	Config  *config.Config
	Dir     string // where manifests and stores lie
	Books   *booking.Books
	Log     *logbook.Book
	Store   *depot.Store
	Tides   *tide.Client
	Weather *tide.Weather

	Roster  *berth.Roster
	Desk    *berth.Desk
	Board   *berth.Board
	Plan    *berth.Plan
	Ledger  *berth.Ledger
	Tariff  *berth.Tariff
	Basin   *berth.Basin
	Chart   *tide.Chart
	Gate    *crew.Gate
	Tugs    *crew.Register
	Team    *crew.Team
	Pilots  *crew.Pilots
	Tower   *crew.Tower
	Shift   *crew.Shift
	Leases  *lease.Table
	Gauges  *meter.Vec
	Memory  *depot.Bytes
	Buffers *depot.Pool[*Buffer]
	Agents  *depot.Client
	Limiter *depot.Limiter
}

// A Buffer is scratch space for one request.
type Buffer struct{ lines []string }

// reset makes b ready for the next request.
func (b *Buffer) reset() { b.lines = b.lines[:0] }

// New puts a harbour together in dir, with the tide service at tides.
func New(ctx context.Context, c *config.Config, dir, tides string) (h *Harbour, err error) {
	books, err := booking.NewBooks(dir)
	if err != nil {
		return nil, err
	}
	log, err := logbook.Open(filepath.Join(dir, "log"), 1<<16)
	if err != nil {
		return nil, errors.Join(err, books.Close())
	}
	store, err := depot.Open(filepath.Join(dir, "changes"))
	if err != nil {
		return nil, errors.Join(err, log.Close(), books.Close())
	}
	hc := &http.Client{Timeout: 10 * time.Second}
	h = &Harbour{
		Config:  c,
		Dir:     dir,
		Books:   books,
		Log:     log,
		Store:   store,
		Tides:   tide.NewClient(tides, hc),
		Weather: tide.NewWeather(tides+"/forecast", hc),
		Roster:  berth.NewRoster(c.Slots, c.Depth),
		Board:   new(berth.Board),
		Plan:    berth.NewPlan(),
		Tariff:  berth.NewTariff(map[string]int{"small": 150, "large": 600}),
		Basin:   berth.NewBasin(2),
		Gate:    new(crew.Gate),
		Tugs:    crew.NewRegister(&crew.Tug{Name: "Bull", Power: 900}, &crew.Tug{Name: "Calf", Power: 300}),
		Pilots:  crew.NewPilots("Ida", "Jon"),
		Tower:   crew.NewTower(),
		Leases:  lease.NewTable(),
		Gauges:  meter.NewVec("harbour"),
		Memory:  depot.NewBytes(1 << 20),
		Buffers: depot.NewPool(4, func() (*Buffer, error) { return new(Buffer), nil }),
		Agents:  new(depot.Client),
		Limiter: depot.NewLimiter(time.Millisecond),
	}
	h.Desk = berth.NewDesk(h.Roster, h.Gauges)
	h.Team = crew.NewTeam(h.Tugs, h.Gauges)
	h.Ledger = berth.NewLedger(func(e berth.Entry) { h.Log.Write(fmt.Sprintf("%d %s", e.Seq, e.Text)) })
	h.Chart = tide.NewChart(map[string]int{"outer": 95, "inner": 70}, h.survey)
	h.Shift = crew.Start(ctx, c.Hands)
	return h, nil
}

// survey finds out a depth that is not on the chart.
func (h *Harbour) survey(name string) (int, error) {
	if len(name) < 3 {
		return 0, fmt.Errorf("no fairway %q", name)
	}
	return 10 * len(name), nil
}

// Close ends the work of the harbour.
func (h *Harbour) Close() error {
	h.Tower.Silence()
	h.Shift.Close()
	h.Leases.Close()
	return errors.Join(h.Store.Close(), h.Log.Close(), h.Books.Close())
}

// Book makes a booking: it waits for room in the basin, brings the ship to its
// slot with a pilot and a tug, and writes everything down.
func (h *Harbour) Book(ctx context.Context, k booking.Booking, quiet bool) (price int, err error) {
	ctx, cancel := context.WithTimeout(ctx, 5*time.Second)
	defer cancel()

	price, ok := h.Tariff.Price("small", k.Hours)
	if !ok {
		return 0, errors.New("no price")
	}
	if err := h.Leases.Acquire(ctx, k.Slot); err != nil {
		return 0, err
	}
	defer h.Leases.Seal(k.Slot)
	if err := h.Basin.Enter(ctx); err != nil {
		return 0, err
	}
	defer h.Basin.Exit()

	if err := h.Desk.Book(k.Ship, k.Slot, k.Hours, quiet); err != nil {
		return 0, err
	}
	defer func() {
		if err != nil {
			h.Desk.Leave(k.Ship)
		}
	}()
	err = h.Pilots.With(k.Ship, func(pilot string) error {
		return h.Team.Tow(ctx, func(tug string) error {
			h.Ledger.Record(fmt.Sprintf("%s to %s with %s and %s", k.Ship, k.Slot, pilot, tug))
			return ctx.Err()
		})
	})
	if err != nil {
		return 0, err
	}
	if err := h.Books.Add(ctx, k); err != nil {
		return 0, err
	}
	err = depot.Apply(h.Store, func(c *depot.Change) error {
		c.Add("%s in %s", k.Ship, k.Slot)
		c.Add("%s owes %d", k.Ship, price)
		return nil
	})
	if err != nil {
		return 0, errors.Join(err, h.Books.Remove(ctx, k.Ship))
	}
	h.Board.Post(berth.Row{Slot: k.Slot, Ship: k.Ship})
	err = depot.Notify(ctx, h.Limiter, h.Agents, []depot.Notice{{Agent: k.Ship, Text: "moored in " + k.Slot}})
	return price, err
}

// Handler returns the routes.
func (h *Harbour) Handler() http.Handler {
	mux := http.NewServeMux()
	mux.HandleFunc("POST /bookings", h.book)
	mux.HandleFunc("GET /bookings/{slot}", h.inSlot)
	mux.HandleFunc("DELETE /bookings/{ship}", h.leave)
	mux.HandleFunc("GET /slots", h.free)
	mux.HandleFunc("POST /slots/{slot}/season", h.layUp)
	mux.HandleFunc("GET /board", h.board)
	mux.HandleFunc("GET /board/{ship}", h.expected)
	mux.HandleFunc("GET /plan", h.plan)
	mux.HandleFunc("POST /plan/{slot}", h.claim)
	mux.HandleFunc("POST /sweep", h.sweep)
	mux.HandleFunc("POST /tariff/{class}", h.raise)
	mux.HandleFunc("POST /gate/{cmd}", h.gate)
	mux.HandleFunc("POST /tugs/{name}", h.renameTug)
	mux.HandleFunc("POST /ledger/{cmd}", h.ledger)
	mux.HandleFunc("GET /depth/{name}", h.depth)
	mux.HandleFunc("GET /tide", h.tide)
	mux.HandleFunc("POST /manifests", h.putManifest)
	mux.HandleFunc("GET /manifests/{ship}", h.getManifest)
	mux.HandleFunc("GET /gauges", h.gauges)
	return mux
}

func (h *Harbour) book(w http.ResponseWriter, r *http.Request) {
	var k booking.Booking
	if err := json.NewDecoder(r.Body).Decode(&k); err != nil {
		fail(w, http.StatusBadRequest, err)
		return
	}
	g := h.Gauges.With("requests")
	g.Inc()
	defer g.Dec()
	price, err := h.Book(r.Context(), k, r.FormValue("quiet") != "")
	switch {
	case errors.Is(err, berth.ErrTaken):
		fail(w, http.StatusConflict, err)
	case errors.Is(err, berth.ErrNoSlot):
		fail(w, http.StatusNotFound, err)
	case err != nil:
		fail(w, http.StatusInternalServerError, err)
	default:
		answer(w, map[string]int{"price": price})
	}
}

func (h *Harbour) inSlot(w http.ResponseWriter, r *http.Request) {
	all, err := h.Books.InSlot(r.Context(), r.PathValue("slot"))
	if err != nil {
		fail(w, http.StatusInternalServerError, err)
		return
	}
	answer(w, all)
}

func (h *Harbour) leave(w http.ResponseWriter, r *http.Request) {
	ship := r.PathValue("ship")
	if err := h.Desk.Leave(ship); err != nil {
		fail(w, http.StatusNotFound, err)
		return
	}
	if err := h.Books.Remove(r.Context(), ship); err != nil && !errors.Is(err, booking.ErrNone) {
		fail(w, http.StatusInternalServerError, err)
		return
	}
	h.Plan.Drop(ship)
	h.Ledger.Record(ship + " left")
	w.WriteHeader(http.StatusNoContent)
}

func (h *Harbour) free(w http.ResponseWriter, r *http.Request) {
	depth, _ := strconv.Atoi(r.FormValue("depth"))
	answer(w, h.Roster.Free(depth))
}

func (h *Harbour) layUp(w http.ResponseWriter, r *http.Request) {
	s, err := h.Roster.Slot(r.PathValue("slot"))
	if err != nil {
		fail(w, http.StatusNotFound, err)
		return
	}
	if err := s.LayUp(); err != nil {
		fail(w, http.StatusConflict, err)
	}
}

func (h *Harbour) board(w http.ResponseWriter, r *http.Request) {
	answer(w, h.Board.Snapshot())
}

func (h *Harbour) expected(w http.ResponseWriter, r *http.Request) {
	slot := h.Board.SlotOf(r.PathValue("ship"))
	if slot == "" {
		fail(w, http.StatusNotFound, errors.New("not on the board"))
		return
	}
	answer(w, slot)
}

func (h *Harbour) plan(w http.ResponseWriter, r *http.Request) {
	if err := h.Plan.Print(w); err != nil {
		h.Ledger.Record("plan: " + err.Error())
	}
}

func (h *Harbour) claim(w http.ResponseWriter, r *http.Request) {
	if !h.Plan.Claim(r.PathValue("slot"), r.FormValue("ship")) {
		fail(w, http.StatusConflict, errors.New("claimed by another ship"))
	}
}

func (h *Harbour) sweep(w http.ResponseWriter, r *http.Request) {
	hours, err := strconv.Atoi(r.FormValue("hours"))
	if err != nil {
		fail(w, http.StatusBadRequest, err)
		return
	}
	answer(w, h.Roster.Sweep(hours))
}

func (h *Harbour) raise(w http.ResponseWriter, r *http.Request) {
	percent, err := strconv.Atoi(r.FormValue("percent"))
	if err != nil {
		fail(w, http.StatusBadRequest, err)
		return
	}
	now, err := h.Tariff.Raise(r.PathValue("class"), percent)
	if err != nil {
		fail(w, http.StatusConflict, err)
		return
	}
	answer(w, now)
}

func (h *Harbour) gate(w http.ResponseWriter, r *http.Request) {
	if err := h.Gate.Apply(r.PathValue("cmd")); err != nil {
		fail(w, http.StatusConflict, err)
		return
	}
	answer(w, h.Gate.State())
}

func (h *Harbour) renameTug(w http.ResponseWriter, r *http.Request) {
	if err := h.Tugs.Rename(r.PathValue("name"), r.FormValue("to")); err != nil {
		fail(w, http.StatusConflict, err)
	}
}

func (h *Harbour) ledger(w http.ResponseWriter, r *http.Request) {
	switch r.PathValue("cmd") {
	case "pause":
		h.Ledger.Pause()
	case "resume":
		h.Ledger.Resume()
	default:
		fail(w, http.StatusNotFound, errors.New("pause or resume"))
	}
}

func (h *Harbour) depth(w http.ResponseWriter, r *http.Request) {
	d, err := h.Chart.Depth(r.PathValue("name"))
	if err != nil {
		fail(w, http.StatusNotFound, err)
		return
	}
	answer(w, d)
}

func (h *Harbour) gauges(w http.ResponseWriter, r *http.Request) {
	h.Gauges.WriteTo(w)
}

// tide answers with the level and the weather, asked for side by side.
func (h *Harbour) tide(w http.ResponseWriter, r *http.Request) {
	ctx, cancel := context.WithTimeout(r.Context(), 2*time.Second)
	defer cancel()
	var (
		wg       sync.WaitGroup
		level    int
		forecast tide.Forecast
		errs     [2]error
	)
	wg.Go(func() { level, errs[0] = h.Tides.Level(ctx, h.Config.Port) })
	wg.Go(func() { forecast, errs[1] = h.Weather.Now(ctx) })
	wg.Wait()
	if err := errors.Join(errs[:]...); err != nil {
		fail(w, http.StatusBadGateway, err)
		return
	}
	answer(w, map[string]any{"level": level, "weather": forecast})
}

func (h *Harbour) putManifest(w http.ResponseWriter, r *http.Request) {
	size := int(r.ContentLength)
	if size <= 0 {
		fail(w, http.StatusLengthRequired, errors.New("length unknown"))
		return
	}
	if err := h.Memory.Reserve(r.Context(), size); err != nil {
		fail(w, http.StatusServiceUnavailable, err)
		return
	}
	defer h.Memory.Return(size)
	m := new(manifest.Manifest)
	if err := json.NewDecoder(r.Body).Decode(m); err != nil {
		fail(w, http.StatusBadRequest, err)
		return
	}
	if m.Ship == "" || filepath.Base(m.Ship) != m.Ship {
		fail(w, http.StatusBadRequest, fmt.Errorf("%q is no ship", m.Ship))
		return
	}
	path, err := manifest.Write(h.Dir, m)
	if err != nil {
		fail(w, http.StatusInternalServerError, err)
		return
	}
	answer(w, filepath.Base(path))
}

func (h *Harbour) getManifest(w http.ResponseWriter, r *http.Request) {
	b, err := h.Buffers.Get(r.Context())
	if err != nil {
		fail(w, http.StatusServiceUnavailable, err)
		return
	}
	defer h.Buffers.Put(b)
	b.reset()
	path := filepath.Join(h.Dir, filepath.Base(r.PathValue("ship"))+".manifest")
	ship, cargo, err := manifest.Preview(path, 20)
	if err != nil {
		fail(w, http.StatusNotFound, err)
		return
	}
	b.lines = append(append(b.lines, ship), cargo...)
	answer(w, b.lines)
}

func answer(w http.ResponseWriter, v any) {
	w.Header().Set("Content-Type", "application/json")
	json.NewEncoder(w).Encode(v)
}

func fail(w http.ResponseWriter, status int, err error) {
	http.Error(w, err.Error(), status)
}

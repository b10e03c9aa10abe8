// Harbourd books berths in an invented harbour.
//
//	harbourd [-addr HOST:PORT] [-config FILE] [-dir DIR] [-tides URL] [-once]
package main

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"net"
	"net/http"
	"os"
	"os/signal"
	"time"

	"example/harbour/api"
	"example/harbour/booking"
	"example/harbour/config"
	"example/harbour/tide"
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt)
	err := run(ctx, os.Args[1:])
	stop()
	if err != nil {
		fmt.Fprintln(os.Stderr, "harbourd:", err)
		os.Exit(1)
	}
}

// run is main with an error.
func run(ctx context.Context, args []string) (err error) {
	flags := flag.NewFlagSet("harbourd", flag.ContinueOnError)
	addr := flags.String("addr", "localhost:8418", "where to listen")
	conf := flags.String("config", "", "settings, a file or a folder with harbour.conf")
	dir := flags.String("dir", "", "where to keep files; a temporary folder if empty")
	tides := flags.String("tides", "", "tide service; invented figures if empty")
	once := flags.Bool("once", false, "make one round of bookings and exit")
	if err := flags.Parse(args); err != nil {
		return err
	}

	c := config.Default()
	if *conf != "" {
		if c, err = config.Load(*conf); err != nil {
			return err
		}
	}
	if *dir == "" {
		tmp, err := os.MkdirTemp("", "harbour-*")
		if err != nil {
			return err
		}
		defer os.RemoveAll(tmp)
		*dir = tmp
	}
	if *tides == "" {
		url, end, err := demoTides()
		if err != nil {
			return err
		}
		defer end()
		*tides = url
	}
	h, err := api.New(ctx, c, *dir, *tides)
	if err != nil {
		return err
	}
	defer func() {
		if cerr := h.Close(); err == nil {
			err = cerr
		}
	}()
	if *once {
		return round(ctx, h)
	}
	return serve(ctx, *addr, h.Handler())
}

// demoTides serves invented tides until end is called.
func demoTides() (url string, end func() error, err error) {
	ln, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		return "", nil, err
	}
	srv := &http.Server{Handler: tide.Demo()}
	go srv.Serve(ln)
	return "http://" + ln.Addr().String(), srv.Close, nil
}

// serve answers requests until ctx ends.
func serve(ctx context.Context, addr string, handler http.Handler) error {
	srv := &http.Server{Addr: addr, Handler: handler}
	failed := make(chan error, 1)
	go func() { failed <- srv.ListenAndServe() }()
	select {
	case err := <-failed:
		return err
	case <-ctx.Done():
	}
	grace, cancel := context.WithTimeout(context.WithoutCancel(ctx), 5*time.Second)
	defer cancel()
	if err := srv.Shutdown(grace); err != nil {
		return err
	}
	if err := <-failed; !errors.Is(err, http.ErrServerClosed) {
		return err
	}
	return nil
}

// round books three ships, lets time pass and prints what is left.
func round(ctx context.Context, h *api.Harbour) error {
	level, err := h.Tides.Level(ctx, h.Config.Port)
	if err != nil {
		return err
	}
	forecast, err := h.Weather.Now(ctx)
	if err != nil {
		return err
	}
	fmt.Printf("level %d cm, %s\n", level, forecast.Text)
	for i, ship := range []string{"Alma", "Brig", "Carina"} {
		k := booking.Booking{Ship: ship, Slot: fmt.Sprintf("n%d", i+1), Hours: 2 * (i + 1)}
		price, err := h.Book(ctx, k, false)
		if err != nil {
			return err
		}
		fmt.Printf("%s in %s for %d cents\n", k.Ship, k.Slot, price)
	}
	fmt.Printf("%d slots became free\n", h.Roster.Sweep(2))
	hours, err := h.Books.Hours(ctx)
	if err != nil {
		return err
	}
	fmt.Printf("%d hours booked, %d notices sent\n", hours, len(h.Agents.Drain()))
	return nil
}

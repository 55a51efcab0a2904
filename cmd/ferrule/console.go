package main

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"net"
	"net/http"

	"github.com/spf13/cobra"

	"ferrule/cmd/ferrule/internal/page"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

func newConsole(env Env) *cobra.Command {
	c := &call{env: env}
	plan, addr := asIs, "127.0.0.1:7750"
	var hosts []string
	cmd := &cobra.Command{
		Use:     "console [FILE]",
		Short:   "Serve a live page on which a scenario runs and is led by hand",
		Example: "  ferrule console coast.yaml --plan video-express",
		Args:    atMostOne,
		RunE: func(cmd *cobra.Command, args []string) error {
			c.format = "text"
			sc, opt, err := c.begin(cmd, args)
			if err != nil {
				return err
			}
			if err := planOf(sc, "plan", plan); err != nil {
				return err
			}
			l, ok := sc.(led)
			if !ok {
				return errors.New("this scenario cannot be led by hand")
			}
			g, err := guardOf(env, addr, hosts)
			if err != nil {
				return err
			}
			opt.plan = plan
			return serve(cmd.Context(), env, l, opt, sc.Plans(), addr, g)
		},
	}
	f := cmd.Flags()
	f.IntVar(&c.cores, "cores", 0, "cores for each session; nothing depends on it (default all)")
	f.StringArrayVar(&c.cuts, "cut", nil, "cut a fibre, as NAME[:120km]@6s[..9s]; may be repeated")
	f.StringArrayVar(&c.sets, "set", nil, "lay PATH=VALUE over the scenario, as run.length=60s; may be repeated")
	f.StringVar(&c.level, "log", "warn", "least level logged on standard error: debug, info, warn or error")
	f.StringVar(&plan, "plan", plan, "plan to run under")
	f.StringVar(&addr, "listen", addr, "HOST:PORT to serve on; any HOST but loopback asks for a token (FERRULE_TOKEN, or a new one)")
	f.StringArrayVar(&hosts, "host", nil, "another name by which the server may be called; may be repeated")
	c.seedFlag(cmd, "of every random draw")
	return cmd
}

// guardOf says who may talk to a server at addr.
func guardOf(env Env, addr string, hosts []string) (page.Guard, error) {
	host, _, err := net.SplitHostPort(addr)
	if err != nil {
		return page.Guard{}, fmt.Errorf("--listen: %w; write HOST:PORT", err)
	}
	g := page.Guard{Hosts: hosts}
	if host == "localhost" {
		return g, nil
	}
	if ip := net.ParseIP(host); ip != nil && ip.IsLoopback() {
		return g, nil
	}
	if g.Token = env.Getenv("FERRULE_TOKEN"); g.Token == "" {
		g.Token = rand.Text()
	} else if len(g.Token) < 16 {
		return g, errors.New("FERRULE_TOKEN: write 16 characters or more")
	}
	if ip := net.ParseIP(host); host != "" && (ip == nil || !ip.IsUnspecified()) {
		g.Hosts = append(g.Hosts, host)
	}
	return g, nil
}

// serve serves until ctx is done.
func serve(ctx context.Context, env Env, l led, opt options, plans []string, addr string, g page.Guard) error {
	listener, err := page.Listen(addr, g)
	if err != nil {
		return failed(fmt.Errorf("--listen: %w", err))
	}
	opt.progress = nil
	start := func(ctx context.Context, plan string, seed uint64) (*study.Session, error) {
		own := opt
		if plan != "" {
			own.plan = plan
		}
		if seed != 0 {
			own.seed = seed
		}
		return l.Session(ctx, own)
	}
	own, stop := context.WithCancel(ctx)
	c := page.NewConsole(own, start, plans, result.Tool{Name: "ferrule", Version: buildVersion()})
	defer c.Wait()
	defer stop()
	if _, err := c.Begin(ctx, "", 0); err != nil {
		return failed(errors.Join(err, listener.Close()))
	}
	s := page.Server(c.Handler(g))
	at := "http://" + listener.Addr().String() + "/"
	if g.Token != "" {
		at += "?token=" + g.Token
	}
	fmt.Fprintf(env.ErrOut, "ferrule: console at %s; interrupt to end\n", at)
	defer context.AfterFunc(ctx, func() { _ = s.Close() })() // it is the end anyway
	if err := s.Serve(listener); !errors.Is(err, http.ErrServerClosed) {
		return failed(err)
	}
	return nil
}

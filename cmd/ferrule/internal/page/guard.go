package page

import (
	"context"
	"crypto/sha256"
	"crypto/subtle"
	"errors"
	"net"
	"net/http"
	"slices"
	"strings"
	"time"
)

// Guard says who may talk to a server.
type Guard struct {
	Hosts []string // names and addresses, without a port, by which it may be called, besides loopback
	Token string   // asked of everybody; empty on loopback only
}

// loopback are the hosts by which a server on this machine is called.
var loopback = []string{"127.0.0.1", "localhost", "::1"}

// policy lets in what the server itself has, and nothing written in a page.
const policy = "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; connect-src 'self'; " +
	"base-uri 'none'; form-action 'none'; frame-ancestors 'none'"

// cookie holds the token in a browser.
const cookie = "ferrule-token"

// Handler is the whole server, behind its guard.
func (c *Console) Handler(g Guard) http.Handler {
	cross := http.NewCrossOriginProtection()
	cross.SetDenyHandler(http.HandlerFunc(func(w http.ResponseWriter, _ *http.Request) {
		refuse(w, http.StatusForbidden, "this comes from another site")
	}))
	inner := cross.Handler(c.mux())
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		h := w.Header()
		h.Set("Content-Security-Policy", policy)
		h.Set("X-Content-Type-Options", "nosniff")
		h.Set("X-Frame-Options", "DENY")
		h.Set("Referrer-Policy", "no-referrer")
		h.Set("Cross-Origin-Resource-Policy", "same-origin")
		h.Set("Cross-Origin-Opener-Policy", "same-origin")
		h.Set("Cache-Control", "no-store")
		switch {
		case !g.knows(r.Host):
			refuse(w, http.StatusMisdirectedRequest, "this server is not called that")
		case g.Token != "" && !g.admits(r):
			if g.login(w, r) {
				return
			}
			h.Set("WWW-Authenticate", "Bearer")
			refuse(w, http.StatusUnauthorized, "the token is wanted: Authorization: Bearer TOKEN, or /?token=TOKEN once")
		case strings.HasPrefix(r.URL.Path, "/api/") && !ownFetch(r):
			refuse(w, http.StatusForbidden, "this comes from another site")
		default:
			r.Body = http.MaxBytesReader(w, r.Body, mostBody)
			inner.ServeHTTP(w, r)
		}
	})
}

// knows reports whether the host of a request is one of the server's: a name
// that somebody else points at this machine is not.
func (g Guard) knows(host string) bool {
	if name, _, err := net.SplitHostPort(host); err == nil {
		host = name
	}
	host = strings.ToLower(strings.Trim(host, "[]"))
	return slices.Contains(loopback, host) || slices.ContainsFunc(g.Hosts, func(h string) bool { return strings.EqualFold(h, host) })
}

// same compares without telling by its time how much is right.
func (g Guard) same(token string) bool {
	a, b := sha256.Sum256([]byte(token)), sha256.Sum256([]byte(g.Token))
	return subtle.ConstantTimeCompare(a[:], b[:]) == 1
}

// admits reports whether a request carries the token.
func (g Guard) admits(r *http.Request) bool {
	if token, ok := strings.CutPrefix(r.Header.Get("Authorization"), "Bearer "); ok {
		return g.same(token)
	}
	k, err := r.Cookie(cookie)
	return err == nil && g.same(k.Value)
}

// login turns the token in the address of the page into a cookie.
func (g Guard) login(w http.ResponseWriter, r *http.Request) bool {
	if r.Method != http.MethodGet || r.URL.Path != "/" || !g.same(r.URL.Query().Get("token")) {
		return false
	}
	http.SetCookie(w, &http.Cookie{Name: cookie, Value: g.Token, Path: "/", HttpOnly: true, SameSite: http.SameSiteStrictMode})
	w.Header().Set("Location", "/")
	w.WriteHeader(http.StatusSeeOther)
	return true
}

// ownFetch reports whether a request comes from the server's own page or from
// no page at all.
func ownFetch(r *http.Request) bool {
	site := r.Header.Get("Sec-Fetch-Site")
	return site == "" || site == "same-origin" || site == "none"
}

// Listen opens addr, HOST:PORT. Any address but loopback needs a token.
func Listen(addr string, g Guard) (net.Listener, error) {
	host, _, err := net.SplitHostPort(addr)
	if err != nil {
		return nil, err
	}
	if ip := net.ParseIP(host); host != "localhost" && (ip == nil || !ip.IsLoopback()) && g.Token == "" {
		return nil, errors.New("an address that is not loopback needs a token")
	}
	return net.Listen("tcp", addr)
}

// writeBuffer is what the system holds for one connection, in bytes: little,
// so that a reader who does not read is noticed soon.
const writeBuffer = 64 << 10

// Server is a server with its time limits; streams set their own.
func Server(h http.Handler) *http.Server {
	return &http.Server{
		Handler: h, ReadHeaderTimeout: 5 * time.Second, ReadTimeout: 10 * time.Second, WriteTimeout: 60 * time.Second,
		IdleTimeout: 2 * time.Minute, MaxHeaderBytes: 16 << 10,
		ConnContext: func(ctx context.Context, conn net.Conn) context.Context {
			if t, ok := conn.(*net.TCPConn); ok {
				_ = t.SetWriteBuffer(writeBuffer) // a wish
			}
			return ctx
		},
	}
}

package main

import (
	"errors"
	"flag"
	"fmt"
	"io"
	"net"
	"net/http"
	"os"
	"strconv"
	"syscall"
)

const (
	usualPort = 8017
	// portsToTry is how many ports from the wanted one on may be taken.
	portsToTry = 20
)

// runServe makes the page and serves it to this machine alone, until it is interrupted.
func runServe(root string, arguments []string) error {
	flags := flag.NewFlagSet("serve", flag.ContinueOnError)
	port := flags.Int("port", usualPort, "port to serve at; the next free one is taken; 0 for any")
	withParent := flags.Bool("with-parent", false, "end when the standard input is closed, as it is when the parent ends")
	if err := flags.Parse(arguments); err != nil {
		return err
	}
	if *withParent {
		go func() {
			io.Copy(io.Discard, os.Stdin)
			os.Exit(0)
		}()
	}
	p, err := makePage(root)
	if err != nil {
		return err
	}
	if err := writePage(root, p); err != nil {
		return err
	}
	listener, err := listen(*port)
	if err != nil {
		return err
	}
	fmt.Printf("serving http://%s/\n", listener.Addr())
	return http.Serve(listener, p)
}

// listen returns a listener on the first free port from the wanted one on.
func listen(port int) (net.Listener, error) {
	for last := port + portsToTry; ; port++ {
		listener, err := net.Listen("tcp", net.JoinHostPort("127.0.0.1", strconv.Itoa(port)))
		if err == nil || !errors.Is(err, syscall.EADDRINUSE) || port == last {
			return listener, err
		}
	}
}

// ServeHTTP answers with the page and with headers that forbid what a policy inside the page cannot: to be framed, and
// connections of any kind to another place.
func (p page) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	if r.URL.Path != "/" {
		http.NotFound(w, r)
		return
	}
	header := w.Header()
	header.Set("Content-Type", "text/html; charset=utf-8")
	header.Set("Content-Security-Policy", p.policy+"; frame-ancestors 'none'")
	header.Set("Connection-Allowlist", "(response-origin)")
	header.Set("X-Content-Type-Options", "nosniff")
	header.Set("Referrer-Policy", "no-referrer")
	header.Set("Cache-Control", "no-store")
	w.Write(p.html)
}

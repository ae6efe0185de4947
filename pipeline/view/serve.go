package view

import (
	"context"
	"errors"
	"net"
	"net/http"
	"time"
)

// Listen takes a port of the loopback, any for 0.
func Listen(ctx context.Context, port int) (net.Listener, error) {
	var c net.ListenConfig
	return c.Listen(ctx, "tcp4", (&net.TCPAddr{IP: net.IPv4(127, 0, 0, 1), Port: port}).String())
}

// Limits of a connection. writing holds an answer's longest time and its transfer.
const (
	reading    = 10 * time.Second
	writing    = longest + 20*time.Second
	idle       = 2 * time.Minute
	ending     = 2 * time.Second
	mostHeader = 32 << 10
)

// Serve answers at l until ctx ends, which is no error.
func Serve(ctx context.Context, l net.Listener, v *Viewer) error {
	s := &http.Server{
		Handler:           v.Handler(l.Addr().String()),
		ReadHeaderTimeout: reading, ReadTimeout: reading, WriteTimeout: writing, IdleTimeout: idle, MaxHeaderBytes: mostHeader,
		BaseContext: func(net.Listener) context.Context { return ctx },
	}
	ended := make(chan error, 1)
	go func() { ended <- s.Serve(l) }()
	select {
	case err := <-ended:
		return err
	case <-ctx.Done():
	}
	// Requests under way see that ctx has ended; they are given a moment to say so.
	last, cancel := context.WithTimeout(context.WithoutCancel(ctx), ending)
	defer cancel()
	if err := s.Shutdown(last); err != nil {
		s.Close() // whoever still reads has had his moment
	}
	if err := <-ended; !errors.Is(err, http.ErrServerClosed) {
		return err
	}
	return nil
}

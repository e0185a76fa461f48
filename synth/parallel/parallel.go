// Package parallel runs independent, index-addressed work on several cores. It
// is the only package that starts goroutines for computing. Work units write
// their results by index and never add to shared sums, so that nothing depends
// on the number of workers or on the order of completion.
package parallel

import (
	"context"
	"runtime"
	"sync"
	"sync/atomic"

	"golang.org/x/sync/errgroup"
)

// Workers returns n, or the number of usable cores if n < 1.
func Workers(n int) int {
	if n < 1 {
		return runtime.GOMAXPROCS(0)
	}
	return n
}

// For calls f(worker, i) once for every i in [0, n), on at most workers
// goroutines (< 1: every core); worker in [0, workers) addresses scratch space.
// It stops early on a cancelled context or an error, and returns the error of
// the lowest index among those that ran.
func For(ctx context.Context, n, workers int, f func(worker, i int) error) error {
	workers = min(Workers(workers), max(n, 1))
	var next atomic.Int64
	var mu sync.Mutex
	failed := n
	var first error
	g, ctx := errgroup.WithContext(ctx)
	for w := range workers {
		g.Go(func() error {
			for {
				if err := ctx.Err(); err != nil {
					return err
				}
				i := int(next.Add(1)) - 1
				if i >= n {
					return nil
				}
				if err := f(w, i); err != nil {
					mu.Lock()
					if i < failed {
						failed, first = i, err
					}
					mu.Unlock()
					return err
				}
			}
		})
	}
	err := g.Wait()
	if first != nil {
		return first
	}
	return err
}

package parallel

import (
	"context"
	"errors"
	"fmt"
	"sync/atomic"
	"testing"
)

func TestForVisitsEveryIndexOnce(t *testing.T) {
	for _, workers := range []int{0, 1, 2, 7} {
		seen := make([]int32, 1000)
		err := For(context.Background(), len(seen), workers, func(w, i int) error {
			if w < 0 || w >= Workers(workers) {
				return fmt.Errorf("worker %d", w)
			}
			atomic.AddInt32(&seen[i], 1)
			return nil
		})
		if err != nil {
			t.Fatal(err)
		}
		for i, n := range seen {
			if n != 1 {
				t.Fatalf("workers %d: index %d ran %d times", workers, i, n)
			}
		}
	}
}

func TestForReturnsAnErrorAndStops(t *testing.T) {
	bad := errors.New("bad")
	var ran atomic.Int32
	err := For(context.Background(), 1_000_000, 2, func(_, i int) error {
		ran.Add(1)
		if i == 10 {
			return bad
		}
		return nil
	})
	if !errors.Is(err, bad) {
		t.Fatalf("got %v", err)
	}
	if ran.Load() == 1_000_000 {
		t.Error("ran to the end after an error")
	}
}

func TestForStopsWhenCancelled(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	err := For(ctx, 5, 2, func(_, _ int) error { t.Error("ran"); return nil })
	if !errors.Is(err, context.Canceled) {
		t.Fatalf("got %v", err)
	}
}

func TestForOfNothing(t *testing.T) {
	if err := For(context.Background(), 0, 3, func(_, _ int) error { return errors.New("ran") }); err != nil {
		t.Fatal(err)
	}
}

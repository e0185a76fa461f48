package synth

import "sync"

// progressCounter returns a function that adds to the work done and reports it, one
// call at a time.
func progressCounter(total int, report func(done, total int)) func(n int) {
	if report == nil {
		return func(int) {}
	}
	var mu sync.Mutex
	done := 0
	return func(n int) {
		mu.Lock()
		defer mu.Unlock()
		done += n
		report(done, total)
	}
}

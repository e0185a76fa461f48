package wave

import "sync"

// A cache keeps spectra for reuse in two generations: when the young one is full, the
// old one is dropped whole. What it holds changes only the time taken.
type cache struct {
	mu         sync.RWMutex
	limit      int // bytes per generation
	size       int // bytes of the young generation
	young, old map[uint64][]float32
}

func (c *cache) init(bytes int) {
	c.limit = bytes / 2
	c.young, c.old = map[uint64][]float32{}, nil
}

func (c *cache) get(key uint64) []float32 {
	c.mu.RLock()
	u, ok := c.young[key]
	old := c.old[key]
	c.mu.RUnlock()
	if ok {
		return u
	}
	if old != nil {
		c.put(key, old)
	}
	return old
}

func (c *cache) put(key uint64, u []float32) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if _, ok := c.young[key]; ok {
		return
	}
	if c.size += 4 * len(u); c.size > c.limit {
		c.old, c.young, c.size = c.young, map[uint64][]float32{}, 4*len(u)
	}
	c.young[key] = u
}

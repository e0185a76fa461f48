package wave

import "sync"

// A rowCache keeps rows for reuse in two generations: when the young one is full, the
// old one is dropped whole. What it holds changes only the time taken.
type rowCache struct {
	mu         sync.RWMutex
	limit      int // bytes per generation
	size       int // bytes of the young generation
	young, old map[uint64][]float32
}

func (c *rowCache) init(bytes int) {
	c.limit = bytes / 2
	c.young, c.old = map[uint64][]float32{}, nil
}

func (c *rowCache) get(key uint64) []float32 {
	c.mu.RLock()
	rows, ok := c.young[key]
	old := c.old[key]
	c.mu.RUnlock()
	if ok {
		return rows
	}
	if old != nil {
		c.put(key, old)
	}
	return old
}

func (c *rowCache) put(key uint64, rows []float32) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if _, ok := c.young[key]; ok {
		return
	}
	if c.size += 4 * len(rows); c.size > c.limit {
		c.old, c.young, c.size = c.young, map[uint64][]float32{}, 4*len(rows)
	}
	c.young[key] = rows
}

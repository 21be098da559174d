package pipeline

import (
	"sync"
	"sync/atomic"
)

// together calls f for 0 … n-1, up to sixteen calls at once, and returns the
// error of the lowest number. It is for questions to the filesystem: behind a
// network each is mostly waiting.
func together(n int, f func(i int) error) error {
	const atOnce, block = 16, 256
	var mu sync.Mutex
	var first error
	lowest := n
	var next atomic.Int64
	var wg sync.WaitGroup
	for range min(atOnce, n/block+1) {
		wg.Go(func() {
			for {
				from := int(next.Add(block)) - block
				if from >= n {
					return
				}
				for i := from; i < min(from+block, n); i++ {
					if err := f(i); err != nil {
						mu.Lock()
						if i < lowest {
							lowest, first = i, err
						}
						mu.Unlock()
						break // the rest of this block is higher
					}
				}
			}
		})
	}
	wg.Wait()
	return first
}

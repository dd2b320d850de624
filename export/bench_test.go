package export

import (
	"runtime"
	"sync"
	"time"
)

func timed(run func()) time.Duration {
	from := time.Now()
	run()
	return time.Since(from)
}

// watchHeap samples the heap until the function it returns is called, which gives the most that was in use, in MB above
// what was in use before.
func watchHeap() func() float64 {
	runtime.GC()
	runtime.GC() // pools let go in the second
	var m runtime.MemStats
	runtime.ReadMemStats(&m)
	base, most := m.HeapInuse, m.HeapInuse
	stop, done := make(chan struct{}), sync.WaitGroup{}
	done.Go(func() {
		tick := time.NewTicker(20 * time.Millisecond)
		defer tick.Stop()
		for {
			select {
			case <-stop:
				return
			case <-tick.C:
				var m runtime.MemStats
				runtime.ReadMemStats(&m)
				most = max(most, m.HeapInuse)
			}
		}
	})
	return func() float64 {
		close(stop)
		done.Wait()
		return float64(most-base) / 1e6
	}
}

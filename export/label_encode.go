package export

import "runtime"

// drawnCode is a code ready to be placed, or why there is none.
type drawnCode struct {
	path []byte
	err  error
}

// encodeCodes encodes all codes on all processors and gives them in the order of the labels; only a window of codes
// stands in memory. A label without an address gets an empty one. stop must be closed when the reader leaves early or
// is done.
func encodeCodes(labels []Label, draw func(i int) ([]byte, error), stop <-chan struct{}) <-chan chan drawnCode {
	workers := runtime.GOMAXPROCS(0)
	order := make(chan chan drawnCode, 32*workers)
	jobs := make(chan func(), workers)
	for range workers {
		go func() {
			for job := range jobs {
				job()
			}
		}()
	}
	go func() {
		defer close(jobs)
		defer close(order)
		for i := range labels {
			done := make(chan drawnCode, 1)
			select {
			case order <- done:
			case <-stop:
				return
			}
			select {
			case jobs <- func() {
				path, err := draw(i)
				done <- drawnCode{path, err}
			}:
			case <-stop:
				return
			}
		}
	}()
	return order
}

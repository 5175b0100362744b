package main

import "sync"

// workers is how many units are drawn and inspected at the same time.
const workers = 2

// inParallel returns do(0) … do(n−1), or the first worker's error.
func inParallel[T any](n int, do func(i int) (T, error)) ([]T, error) {
	out := make([]T, n)
	errs := make([]error, workers)
	var wg sync.WaitGroup
	for w := range workers {
		wg.Go(func() {
			for i := w; i < n && errs[w] == nil; i += workers {
				out[i], errs[w] = do(i)
			}
		})
	}
	wg.Wait()
	for _, err := range errs {
		if err != nil {
			return nil, err
		}
	}
	return out, nil
}

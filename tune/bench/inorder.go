package bench

import (
	"runtime"
	"sync/atomic"
)

// inOrder does n things on all cores and hands the results on in their order. It
// ends with the first error.
func inOrder[T any](n int, do func(i int) (T, error), each func(T)) ([]T, error) {
	type result struct {
		v   T
		err error
	}
	slots := make([]chan result, n)
	for i := range slots {
		slots[i] = make(chan result, 1)
	}
	var next, stop atomic.Int64
	for range runtime.NumCPU() {
		go func() {
			for i := int(next.Add(1)) - 1; i < n && stop.Load() == 0; i = int(next.Add(1)) - 1 {
				v, err := do(i)
				slots[i] <- result{v, err}
			}
		}()
	}
	var out []T
	for i := range slots {
		r := <-slots[i]
		if r.err != nil {
			stop.Store(1)
			return out, r.err
		}
		out = append(out, r.v)
		if each != nil {
			each(r.v)
		}
	}
	return out, nil
}

package parallel

import (
	"sync/atomic"
	"testing"
)

func TestEach(t *testing.T) {
	for _, n := range []int{0, 1, 7, 1000} {
		for _, workers := range []int{-1, 0, 1, 3, 2000} {
			calls := make([]atomic.Int32, n)
			Each(n, workers, func(i int) { calls[i].Add(1) })
			for i := range calls {
				if c := calls[i].Load(); c != 1 {
					t.Errorf("%d of %d on %d workers: called %d times", i, n, workers, c)
				}
			}
		}
	}
}

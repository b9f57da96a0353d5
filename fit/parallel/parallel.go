// Package parallel runs a loop on several cores.
//
// A count and a function go in; the function is called once for every number below the count, in no certain order. It refuses nothing. It stands
// first in the flow and imports nothing of the project.
package parallel

import (
	"runtime"
	"sync"
)

// Each calls f for 0 to n-1 on so many workers (0 or fewer: one a core) and returns once all calls have ended.
func Each(n, workers int, f func(i int)) {
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	next := make(chan int)
	var wg sync.WaitGroup
	for range min(n, workers) {
		wg.Add(1)
		go func() {
			defer wg.Done()
			for i := range next {
				f(i)
			}
		}()
	}
	for i := range n {
		next <- i
	}
	close(next)
	wg.Wait()
}

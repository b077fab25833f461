package sim

import (
	"time"

	"gainwright/safety"
)

type itemKind uint8

const (
	itBoard itemKind = iota
	itTick
	itSample
	itFrame
	itPerson
	itPlug
	itHear   // a message reaches the board
	itArrive // a line reaches the laptop
	itIntent // something asked for reaches the limiter
)

// item is one thing that will happen.
type item struct {
	at    time.Duration
	seq   uint64 // breaks ties, so that the order never depends on the heap
	kind  itemKind
	msg   message
	event safety.Event
	taken time.Duration // when the sample was taken or the intent composed
}

// heap is a binary heap by time, then by order of arrival.
type heap []item

func (h heap) less(i, j int) bool {
	return h[i].at < h[j].at || h[i].at == h[j].at && h[i].seq < h[j].seq
}

func (h *heap) push(it item) {
	*h = append(*h, it)
	q := *h
	for i := len(q) - 1; i > 0; {
		up := (i - 1) / 2
		if !q.less(i, up) {
			return
		}
		q[i], q[up] = q[up], q[i]
		i = up
	}
}

func (h *heap) pop() item {
	q := *h
	top := q[0]
	n := len(q) - 1
	q[0] = q[n]
	q[n] = item{}
	*h = q[:n]
	q = q[:n]
	for i := 0; ; {
		c := 2*i + 1
		if c >= n {
			return top
		}
		if c+1 < n && q.less(c+1, c) {
			c++
		}
		if !q.less(c, i) {
			return top
		}
		q[i], q[c] = q[c], q[i]
		i = c
	}
}

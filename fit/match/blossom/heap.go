package blossom

type kind int32

const (
	meet  kind = iota // a half from an outer vertex becomes tight
	open              // the dual of an inner blossom falls to 0
	leave             // the dual of an outer vertex rises to its limit
)

// event is what may happen to the tree at a time of the search.
type event struct {
	time int64
	kind kind
	what int32 // half, blossom or vertex
}

// heap gives events in order of time; four children a node.
type heap struct{ a []event }

func (q *heap) clear() { q.a = q.a[:0] }

func (q *heap) push(e event) {
	q.a = append(q.a, e)
	a := q.a
	i := len(a) - 1
	for i > 0 {
		p := (i - 1) / 4
		if a[p].time <= e.time {
			break
		}
		a[i] = a[p]
		i = p
	}
	a[i] = e
}

func (q *heap) pop() (event, bool) {
	a := q.a
	if len(a) == 0 {
		return event{}, false
	}
	out, e := a[0], a[len(a)-1]
	a = a[:len(a)-1]
	q.a = a
	i := 0
	for {
		c := 4*i + 1
		if c >= len(a) {
			break
		}
		least := c
		for k := c + 1; k < min(c+4, len(a)); k++ {
			if a[k].time < a[least].time {
				least = k
			}
		}
		if a[least].time >= e.time {
			break
		}
		a[i] = a[least]
		i = least
	}
	if len(a) > 0 {
		a[i] = e
	}
	return out, true
}

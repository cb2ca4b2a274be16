package automaton

// Minimise merges states with the same future: those from which every sequence of letters fires at the same points. A
// state stays with its panel. The start stays state 0.
//
// The method is the partition refinement of Valmari and Lehtinen (2008, STACS, from memory): blocks of states and cords
// of transitions refine each other, always working with the smaller half, in time m·log n for m transitions. A firing
// transition of a machine that ends is left out, which sets its state apart from those that have one; in a continuing
// machine it carries a letter of its own.
func (d *DFA) Minimise() *DFA {
	states := d.States()
	tails, heads, labels := d.transitions()
	blocks := newPartition(states)
	if d.Panel != nil {
		blocks.splitBy(func(s int32) int32 { return d.Panel[s] })
	}
	cords := newPartition(len(labels))
	cords.splitBy(func(t int32) int32 { return labels[t] })
	incoming, first := adjacency(states, heads)
	for block, cord := 1, 0; cord < cords.sets(); cord++ {
		for _, t := range cords.set(cord) {
			blocks.mark(tails[t])
		}
		blocks.split()
		for ; block < blocks.sets(); block++ {
			for _, s := range blocks.set(block) {
				for _, t := range incoming[first[s]:first[s+1]] {
					cords.mark(t)
				}
			}
			cords.split()
		}
	}
	return d.quotient(blocks)
}

// transitions lists the machine's transitions. Those that fire and end it are left out.
func (d *DFA) transitions() (tails, heads, labels []int32) {
	size := len(d.Next)
	tails, heads, labels = make([]int32, 0, size), make([]int32, 0, size), make([]int32, 0, size)
	for at, next := range d.Next {
		label := int32(at % d.Letters)
		if next < 0 {
			if !d.Continuing {
				continue
			}
			next, label = ^next, label+int32(d.Letters)
		}
		tails, heads, labels = append(tails, int32(at/d.Letters)), append(heads, next), append(labels, label)
	}
	return tails, heads, labels
}

// adjacency lists for each state the transitions that lead to it.
func adjacency(states int, heads []int32) (incoming, first []int32) {
	first = make([]int32, states+2)
	for _, h := range heads {
		first[h+2]++
	}
	for s := 1; s < len(first); s++ {
		first[s] += first[s-1]
	}
	incoming = make([]int32, len(heads))
	for t, h := range heads {
		incoming[first[h+1]] = int32(t)
		first[h+1]++
	}
	return incoming, first[:states+1]
}

// quotient gives the machine whose states are the blocks, in the order in which they are reached from the start.
func (d *DFA) quotient(blocks *partition) *DFA {
	q := &DFA{Letters: d.Letters, Continuing: d.Continuing}
	number := make([]int32, blocks.sets())
	for i := range number {
		number[i] = -1
	}
	number[blocks.of[0]] = 0
	queue := []int32{0} // one state of each block reached
	for i := 0; i < len(queue); i++ {
		s := int(queue[i])
		if d.Panel != nil {
			q.Panel = append(q.Panel, d.Panel[s])
		}
		for _, next := range d.Next[s*d.Letters : (s+1)*d.Letters] {
			fired := next < 0
			if fired && !d.Continuing {
				q.Next = append(q.Next, Fired)
				continue
			}
			if fired {
				next = ^next
			}
			block := blocks.of[next]
			if number[block] < 0 {
				number[block] = int32(len(queue))
				queue = append(queue, next)
			}
			to := number[block]
			if fired {
				to = ^to
			}
			q.Next = append(q.Next, to)
		}
	}
	return q
}

// partition is a refinable partition of 0..n-1: the elements of each set lie side by side, the marked ones first.
type partition struct {
	elements, where, of []int32
	first, past, marked []int32
	touched             []int32
}

func newPartition(n int) *partition {
	p := &partition{elements: make([]int32, n), where: make([]int32, n), of: make([]int32, n)}
	for i := range p.elements {
		p.elements[i], p.where[i] = int32(i), int32(i)
	}
	if n > 0 {
		p.first, p.past, p.marked = []int32{0}, []int32{int32(n)}, []int32{0}
	}
	return p
}

func (p *partition) sets() int         { return len(p.first) }
func (p *partition) set(s int) []int32 { return p.elements[p.first[s]:p.past[s]] }

// splitBy makes the sets of a fresh partition those of equal keys. Keys are small and not negative.
func (p *partition) splitBy(key func(int32) int32) {
	groups := map[int32]int32{}
	var counts []int32
	for e := range p.of {
		k := key(int32(e))
		g, known := groups[k]
		if !known {
			g = int32(len(counts))
			groups[k] = g
			counts = append(counts, 0)
		}
		p.of[e] = g
		counts[g]++
	}
	p.first, p.past, p.marked = p.first[:0], p.past[:0], p.marked[:0]
	at := int32(0)
	for _, c := range counts {
		p.first, p.past, p.marked = append(p.first, at), append(p.past, at), append(p.marked, 0)
		at += c
	}
	for e, g := range p.of {
		p.elements[p.past[g]], p.where[e] = int32(e), p.past[g]
		p.past[g]++
	}
}

// mark moves an element among the marked ones of its set.
func (p *partition) mark(e int32) {
	s := p.of[e]
	i, j := p.where[e], p.first[s]+p.marked[s]
	if i < j {
		return
	}
	p.elements[i] = p.elements[j]
	p.where[p.elements[i]] = i
	p.elements[j], p.where[e] = e, j
	if p.marked[s] == 0 {
		p.touched = append(p.touched, s)
	}
	p.marked[s]++
}

// split parts every set that has marked and unmarked elements; the smaller part becomes the new set.
func (p *partition) split() {
	for _, s := range p.touched {
		j := p.first[s] + p.marked[s]
		if j == p.past[s] {
			p.marked[s] = 0
			continue
		}
		fresh := int32(len(p.first))
		if p.marked[s] <= p.past[s]-j {
			p.first, p.past = append(p.first, p.first[s]), append(p.past, j)
			p.first[s] = j
		} else {
			p.first, p.past = append(p.first, j), append(p.past, p.past[s])
			p.past[s] = j
		}
		p.marked = append(p.marked, 0)
		p.marked[s] = 0
		for _, e := range p.elements[p.first[fresh]:p.past[fresh]] {
			p.of[e] = fresh
		}
	}
	p.touched = p.touched[:0]
}

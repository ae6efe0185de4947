package sequence

import (
	"context"
	"sync"
)

// group is the steps that show the same mirrors.
type group struct {
	bits    []uint8
	science bool
	steps   []int // indices into Steps
}

// groups gathers the steps by the mask they show, in order of first use. Two
// groups may still share a mask: code bits of dark columns move no mirror.
func (s *Sequence) groups() []*group {
	hasSentinels := false
	for _, r := range s.Rows {
		hasSentinels = hasSentinels || r.Use == UseSentinel
	}
	type key struct {
		bits    string
		science bool
	}
	var all []*group
	known := map[key]*group{}
	for i, st := range s.Steps {
		science := hasSentinels && st.Kind == Science
		k := key{string(s.Code[i]), science}
		g := known[k]
		if g == nil {
			g = &group{bits: s.Code[i], science: science}
			known[k] = g
			all = append(all, g)
		}
		g.steps = append(g.steps, i)
	}
	return all
}

// forEachGroup calls work once for each group on so many workers, each with a
// mask of its own in which the group's mirrors are expanded. The error is that
// of the first group that failed, whatever the workers, or the context's.
func (s *Sequence) forEachGroup(ctx context.Context, workers int, work func(g *group, m *Mask) error) error {
	groups, x := s.groups(), s.expander()
	failed := make([]error, len(groups))
	next := make(chan int)
	var wait sync.WaitGroup
	for range max(1, min(workers, len(groups))) {
		wait.Go(func() {
			m := s.newMask()
			for i := range next {
				x.expand(m.On, groups[i].bits, groups[i].science)
				failed[i] = work(groups[i], m)
			}
		})
	}
	var cancelled error
	for i := range groups {
		if cancelled = ctx.Err(); cancelled != nil {
			break
		}
		next <- i
	}
	close(next)
	wait.Wait()
	if cancelled != nil {
		return cancelled
	}
	for _, err := range failed {
		if err != nil {
			return err
		}
	}
	return nil
}

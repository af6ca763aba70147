package localise

import (
	"cordwalk.example/cordwalk/exam"
)

// Drawer draws the exams of a simulated animal with a lesion at one place, at any severity, also
// between the steps of Severities: what says whether an answer holds as often as it claims to must
// come from the model itself. A Drawer is for one goroutine at a time.
type Drawer struct {
	m       *Model
	site    *site
	choices []hypothesis // what is summed out: balance, central or peripheral, plexus variant, company
	total   float64
	cells   []int
	weight  [points]float64
	b       body
	st      state
}

// Drawer returns a drawer of exams that look at the given cells, of a lesion at a place of Model.Sites, later than the first
// week. Cells that the model does not hold, and those of the cutaneous trunci, whose answer
// is a level, are left out.
func (m *Model) Drawer(place int, keys []exam.Key) *Drawer {
	m.Sites()
	d := &Drawer{m: m, site: m.sp.sites[m.serialOf[place]]}
	_, d.weight = m.p.quadrature()
	one := *m.sp
	one.sites = []*site{d.site}
	one.each(func(h *hypothesis) {
		// In later weeks what is summed out is as likely at every severity: one of them tells.
		if h.severity == 0 && !h.acute {
			d.choices = append(d.choices, *h)
			d.total += h.prior
		}
	})
	for _, k := range keys {
		if ci, ok := m.lay.find(k); ok && k.Item != exam.CutaneousTrunci {
			d.cells = append(d.cells, ci)
		}
	}
	return d
}

// Chance gives numbers from 0 up to 1, each as likely; *rand.Rand does.
type Chance interface{ Float64() float64 }

// Draw returns the findings of one exam at a severity from 0, sound, to 1, complete.
func (d *Drawer) Draw(r Chance, severity float64) []exam.Finding {
	u, k := r.Float64()*d.total, 0
	for ; k < len(d.choices)-1; k++ {
		if u -= d.choices[k].prior; u < 0 {
			break
		}
	}
	h := &d.choices[k]
	d.b.reset()
	if severity > 0 {
		d.m.sp.put(&d.b, h.site, h, severity)
	}
	d.st.derive(&d.b, &d.m.sp.arcs[h.variant], d.m.p)
	deviation := map[int]int{} // by group: the point that its cells share
	out := make([]exam.Finding, 0, len(d.cells))
	for _, ci := range d.cells {
		c := &d.m.lay.cells[ci]
		q, ok := deviation[c.group]
		if !ok {
			total := 0.0
			for _, w := range d.weight {
				total += w
			}
			u := r.Float64() * total
			for q < points-1 && u >= d.weight[q] {
				u -= d.weight[q]
				q++
			}
			deviation[c.group] = q
		}
		var key rowKey
		c.row(d.m.sp, c, &d.st, &key)
		var p [32][points]float64
		d.m.p.rowOf(d.m.species, c, key, p[:c.cats])
		g, u := 0, r.Float64()
		for ; g < c.cats-1 && u >= p[g][q]; g++ {
			u -= p[g][q]
		}
		out = append(out, exam.Finding{Item: c.item, Site: c.site, Digit: c.digit, Joint: c.joint, Result: exam.Graded(c.low + int8(g))})
	}
	exam.SortFindings(out)
	return out
}

package sheet

import (
	"sync"
	"time"

	"cordwalk.example/cordwalk/app/view/demo"
)

// demoPractice is the demo practice as it was on a fixed day, made once.
var demoPractice = sync.OnceValue(func() demo.Practice {
	return demo.New(1, time.Date(2026, 11, 2, 9, 0, 0, 0, zone))
})

// demoInputs are the papers' inputs of every animal of the demo practice, by name.
func demoInputs() map[string]Input {
	out := map[string]Input{}
	p := demoPractice()
	for _, c := range p.Cases {
		pt := c.Patient
		in := Input{Practice: p.Practice, Patient: pt, Visits: c.Visits, At: time.Date(2026, 11, 2, 12, 0, 0, 0, zone)}
		out[pt.Name] = in
	}
	return out
}

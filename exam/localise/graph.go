package localise

import (
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
)

// nerveID numbers the named nerves that a hypothesis can cut: those of package anatomy by
// their own numbers, then nerves of the head and the sympathetic trunk.
type nerveID uint8

const (
	nerveTrigeminal nerveID = iota + nerveID(anatomy.CaudalNerves) + 1
	nerveFacial
	nerveOculomotor
	nerveOptic
	nerveVagus // with its recurrent laryngeal branch
	nerveHypoglossal
	nerveSympathetic // trunk and cranial cervical ganglion
	nerveRadialLow   // radial below the branches to triceps
	nerveCount
)

var headNerves = map[nerveID]string{nerveTrigeminal: "trigeminal", nerveFacial: "facial", nerveOculomotor: "oculomotor",
	nerveOptic: "optic", nerveVagus: "vagus or recurrent laryngeal", nerveHypoglossal: "hypoglossal",
	nerveSympathetic: "sympathetic trunk", nerveRadialLow: "radial, below the elbow's extensors"}

// name returns the nerve's name.
func (n nerveID) name() string {
	if s, ok := headNerves[n]; ok {
		return s
	}
	return anatomy.Nerve(n).String()
}

// arcPlan says where an arc's weights come from: a muscle of the vocabulary, or a nerve.
type arcPlan struct {
	muscle exam.Item
	nerve  anatomy.Nerve
	girdle int
	cut    []nerveShare
}

func of(n anatomy.Nerve) nerveID { return nerveID(n) }

// arcPlans: which named nerves carry each arc (anatomy.md C and D). Shares below 1 are
// judgements, from memory: the hip keeps its lumbar branches, the paw its other nerves.
var arcPlans = [arcCount]arcPlan{
	arcShoulder:     {exam.MassSupraspinatus, 0, thoracic, []nerveShare{{of(anatomy.Suprascapular), 1}}},
	arcDeltoid:      {0, anatomy.Axillary, thoracic, []nerveShare{{of(anatomy.Axillary), 0.8}, {of(anatomy.Subscapular), 0.1}, {of(anatomy.Thoracodorsal), 0.1}, {of(anatomy.LongThoracic), 0.05}, {of(anatomy.CranialPectoral), 0.05}, {of(anatomy.CaudalPectoral), 0.05}}},
	arcBiceps:       {exam.MassBiceps, 0, thoracic, []nerveShare{{of(anatomy.Musculocutaneous), 1}}},
	arcTriceps:      {exam.MassTriceps, 0, thoracic, []nerveShare{{of(anatomy.Radial), 1}}},
	arcExtensor:     {exam.MassExtensorCarpi, 0, thoracic, []nerveShare{{of(anatomy.Radial), 1}, {nerveRadialLow, 1}}},
	arcForearm:      {exam.MassForearmFlexors, 0, thoracic, []nerveShare{{of(anatomy.Median), 0.6}, {of(anatomy.Ulnar), 0.5}}},
	arcQuadriceps:   {exam.MassQuadriceps, 0, pelvic, []nerveShare{{of(anatomy.Femoral), 1}}},
	arcHip:          {0, anatomy.Femoral, pelvic, []nerveShare{{of(anatomy.Femoral), 0.6}, {of(anatomy.LateralCutaneousFemoral), 0.1}, {of(anatomy.Obturator), 0.1}}},
	arcHamstring:    {exam.MassHamstrings, 0, pelvic, []nerveShare{{of(anatomy.Sciatic), 1}}},
	arcGluteal:      {exam.MassGluteals, 0, pelvic, []nerveShare{{of(anatomy.CranialGluteal), 0.6}, {of(anatomy.CaudalGluteal), 0.4}}},
	arcTibialis:     {exam.MassCranialTibial, 0, pelvic, []nerveShare{{of(anatomy.Sciatic), 1}, {of(anatomy.Fibular), 1}}},
	arcGastroc:      {exam.MassGastrocnemius, 0, pelvic, []nerveShare{{of(anatomy.Sciatic), 1}, {of(anatomy.Tibial), 1}}},
	arcPlantar:      {0, anatomy.Tibial, pelvic, []nerveShare{{of(anatomy.Sciatic), 1}, {of(anatomy.Tibial), 0.8}, {of(anatomy.Fibular), 0.3}}},
	arcPudendal:     {0, anatomy.Pudendal, pelvic, []nerveShare{{of(anatomy.Pudendal), 0.9}}},
	arcPelvic:       {0, anatomy.Pelvic, pelvic, []nerveShare{{of(anatomy.Pelvic), 0.9}, {of(anatomy.Hypogastric), 0.2}}},
	arcTail:         {0, anatomy.CaudalNerves, pelvic, []nerveShare{{of(anatomy.CaudalNerves), 1}}},
	arcTrunci:       {0, anatomy.LateralThoracic, thoracic, []nerveShare{{of(anatomy.LateralThoracic), 1}}},
	arcHorner:       {0, 0, thoracic, []nerveShare{{nerveSympathetic, 1}}},
	arcPhrenic:      {0, anatomy.Phrenic, thoracic, []nerveShare{{of(anatomy.Phrenic), 1}}},
	arcRadialSkin:   {0, anatomy.Radial, thoracic, []nerveShare{{of(anatomy.Radial), 1}, {nerveRadialLow, 0.8}}},
	arcUlnarSkin:    {0, anatomy.Ulnar, thoracic, []nerveShare{{of(anatomy.Ulnar), 1}}},
	arcMusculoSkin:  {0, anatomy.Musculocutaneous, thoracic, []nerveShare{{of(anatomy.Musculocutaneous), 1}}},
	arcAxillarySkin: {0, anatomy.Axillary, thoracic, []nerveShare{{of(anatomy.Axillary), 1}}},
	arcSaphenousSkin: {0, anatomy.Saphenous, pelvic, []nerveShare{{of(anatomy.Femoral), 1}, {of(anatomy.Saphenous), 1},
		{of(anatomy.Genitofemoral), 0.1}}},
	arcFibularSkin:  {0, anatomy.Fibular, pelvic, []nerveShare{{of(anatomy.Sciatic), 1}, {of(anatomy.Fibular), 1}}},
	arcTibialSkin:   {0, anatomy.Tibial, pelvic, []nerveShare{{of(anatomy.Sciatic), 1}, {of(anatomy.Tibial), 1}}},
	arcPudendalSkin: {0, anatomy.Pudendal, pelvic, []nerveShare{{of(anatomy.Pudendal), 0.9}, {of(anatomy.CaudalCutaneousFemoral), 0.3}}},
	arcTailSkin:     {0, anatomy.CaudalNerves, pelvic, []nerveShare{{of(anatomy.CaudalNerves), 1}}},
	arcFrontSense:   {0, 0, thoracic, []nerveShare{{of(anatomy.Radial), 0.4}, {of(anatomy.Ulnar), 0.25}, {of(anatomy.Median), 0.25}, {of(anatomy.Musculocutaneous), 0.1}, {nerveRadialLow, 0.3}}},
	arcHindSense:    {0, 0, pelvic, []nerveShare{{of(anatomy.Sciatic), 0.75}, {of(anatomy.Femoral), 0.25}, {of(anatomy.Fibular), 0.4}, {of(anatomy.Tibial), 0.4}, {of(anatomy.Saphenous), 0.2}}},
}

// composite arcs are means of others.
var compositeArcs = map[arcID][]arcID{
	arcFrontSense: {arcRadialSkin, arcUlnarSkin, arcMusculoSkin},
	arcHindSense:  {arcSaphenousSkin, arcFibularSkin, arcTibialSkin},
}

// buildArcs returns the arcs of a species with every root moved by the variant's shift.
func buildArcs(s exam.Species, shift [2]int) (arcs [arcCount]arc) {
	for id := range arcs {
		plan := &arcPlans[id]
		a := &arcs[id]
		a.girdle, a.nerves = plan.girdle, plan.cut
		var ws []anatomy.Weight
		moves := true
		switch {
		case arcID(id) == arcHorner:
			for n := 1; n <= 3; n++ { // Zwueste-2019: T1–T3; the variants do not move them
				ws = append(ws, anatomy.Weight{Segment: anatomy.NewSegment(exam.RegionT, n), Weight: 1})
			}
			moves = false
		case plan.muscle != 0:
			site := plan.muscle.Info().Sites[0]
			if plan.girdle == pelvic && site.IsThoracic() {
				site = exam.PelvicLeft
			}
			row, ok, err := anatomy.ArcFor(s, plan.muscle, site)
			if err != nil || !ok {
				panic("localise: no arc of " + plan.muscle.String())
			}
			ws, moves = row.Segments, !row.Counted
		case plan.nerve != 0:
			info, err := anatomy.InfoOf(s, plan.nerve)
			if err != nil {
				panic(err)
			}
			ws, moves = info.Roots, !info.Counted && info.Plexus != anatomy.CaudalPlexus
		}
		if moves {
			ws = anatomy.Shift(s, ws, shift[plan.girdle])
		}
		for _, w := range anatomy.Normalised(ws) {
			a.weight[anatomy.Index(s, w.Segment)] += w.Weight
		}
	}
	for id, parts := range compositeArcs {
		for _, part := range parts {
			for k, w := range arcs[part].weight {
				arcs[id].weight[k] += float64(w / float64(len(parts)))
			}
		}
	}
	for id := range arcs {
		a := &arcs[id]
		a.lo, a.hi = maxSegments, 0
		for k := maxSegments - 1; k >= 0; k-- {
			a.from[k] = a.from[k+1] + a.weight[k]
			if a.weight[k] > 0 {
				a.lo, a.hi = k, max(a.hi, k+1)
			}
		}
	}
	return arcs
}

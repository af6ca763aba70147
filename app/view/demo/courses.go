package demo

import (
	"cordwalk.example/cordwalk/exam"
)

// The courses of the demo practice. Shapes and speeds are a choice of this program, kept
// within what progression.md says is usual: most of the recovery of a surgical
// thoracolumbar extrusion in the first weeks, degenerative myelopathy down over months,
// a plexus injury slow and incomplete.

// weekly is so many visits a week apart after the first.
func weekly(n int) []int { return every(7, n) }

func every(days, n int) []int {
	out := make([]int, n)
	for i := range out {
		out[i] = days
	}
	return out
}

// transverse is damage of the whole cord at a level, left and right, with little of the
// grey matter where nothing hangs on it.
func transverse(from, to string, left, right float64) lesion {
	h := func(s float64) half {
		return half{grey: float64(0.9 * s), down: s, up: s, touch: float64(0.8 * s), deep: float64(0.62 * s)}
	}
	return lesion{from, to, h(left), h(right)}
}

func vet(name, phone string) exam.Contact { return exam.Contact{Name: name, Phone: phone} }

func program(kinds ...exam.HomeExercise) []exam.HomeExercise { return kinds }

func courses() []course {
	walks := exam.Goal{Words: "walks ten steps alone", Item: "ambulation", Site: "midline", Target: 2}
	return []course{
		{ // steady recovery after a thoracolumbar extrusion
			patient: exam.Patient{Name: "Bramble", Species: exam.Dog, Breed: "Dachshund", Sex: exam.Female, Neutered: true,
				Owner:        exam.Contact{Name: "Ida Fenn", Phone: "01632 960 111", Email: "ida@fenn.example"},
				Veterinarian: vet("Dr P. Alder (demo)", "01632 960 120"), Referral: exam.Referral{By: "Dr P. Alder (demo)"},
				Problems:  []exam.Problem{{Diagnosis: "disc extrusion", Level: "T12-T13", Side: "left"}},
				Goals:     []exam.Goal{walks, {Words: "left hind limb bears weight alone", Item: "voluntary-motor", Site: "pelvic-left", Target: 3}},
				Medicines: []exam.Medicine{{Name: "gabapentin", Dose: "as prescribed"}}},
			age: 5.8, kg: 8.6, onset: 9, surgery: 1, last: 4, every: weekly(11), truth: "T3-L3",
			lesions: []lesion{transverse("T12", "T13", 1, 0.86)}, painAt: exam.Thoracolumbar,
			phases: []phase{{9, []float64{0.97}, 1.6}, {23, []float64{0.8}, 1}, {44, []float64{0.5}, 0.5}, {65, []float64{0.3}, 0}, {93, []float64{0.15}, 0}},
			full:   4,
			visit: func(n int, v *exam.Visit) {
				v.Treatments = []exam.Treatment{{Kind: "assisted-standing", Minutes: 10}, {Kind: "passive-movement", Site: "pelvic limbs", Minutes: 8}}
				if n > 3 {
					v.Treatments = append(v.Treatments, exam.Treatment{Kind: "underwater-treadmill", Params: "0.8 km/h, water at the hip", Minutes: 8})
				}
				v.Home = program(exam.HomeExercise{Kind: "help-to-stand", Times: 3, DaysWeek: 7, Amount: "3 minutes"},
					exam.HomeExercise{Kind: "leg-cycling", Times: 2, DaysWeek: 7, Amount: "10 slow bends of each hind limb"})
				v.Report = exam.OwnerReport{Appetite: "normal", ExercisesDone: 5 + n%3, ExercisesSet: 7}
			},
		},
		{ // lumbosacral disease: weak feet and sound thighs
			patient: exam.Patient{Name: "Otis", Species: exam.Dog, Breed: "German shepherd dog", Sex: exam.Male, Neutered: true,
				Owner:        exam.Contact{Name: "Nell Rowan", Phone: "01632 960 112"},
				Veterinarian: vet("Dr P. Alder (demo)", "01632 960 120"),
				Problems:     []exam.Problem{{Diagnosis: "degenerative lumbosacral stenosis", Level: "L7-S1"}},
				Goals:        []exam.Goal{{Words: "no scuffing on the left", Item: "knuckling", Site: "pelvic-left", Target: 3}}},
			age: 8.2, kg: 34, onset: 90, surgery: -1, last: 2, every: every(14, 9), truth: "L4-S3",
			lesions: []lesion{{"L7", "S1", half{root: 0.85}, half{root: 0.7}}}, painAt: exam.Lumbosacral,
			phases: []phase{{0, []float64{0.2}, 1}, {90, []float64{0.92}, 2.1}, {140, []float64{0.85}, 1.5}, {220, []float64{0.72}, 1}},
			full:   3,
			visit: func(n int, v *exam.Visit) {
				v.Treatments = []exam.Treatment{{Kind: "massage", Site: "lumbar muscles", Minutes: 10}, {Kind: "heat", Site: "lumbar muscles", Minutes: 10}}
				v.Home = program(exam.HomeExercise{Kind: "slow-walk", Times: 3, DaysWeek: 7, Amount: "10 minutes on a level path"})
			},
		},
		{ // a one-sided infarct of the cervical enlargement
			patient: exam.Patient{Name: "Juno", Species: exam.Dog, Breed: "Labrador retriever", Sex: exam.Female,
				Owner:        exam.Contact{Name: "Otto Brandt", Phone: "01632 960 113"},
				Veterinarian: vet("Dr M. Sayer (demo)", "01632 960 121"),
				Problems:     []exam.Problem{{Diagnosis: "fibrocartilaginous embolism", Level: "C6-C7", Side: "right"}},
				Goals:        []exam.Goal{walks}},
			age: 4.5, kg: 27, onset: 6, surgery: -1, last: 6, every: weekly(9), truth: "C6-T2", thoracic: true,
			lesions: []lesion{{"C7", "T1", half{grey: 0.1, down: 0.12, up: 0.12}, half{grey: 0.82, down: 0.82, up: 0.75, touch: 0.3, deep: 0.15}}},
			phases:  []phase{{6, []float64{1}, 0}, {20, []float64{0.8}, 0}, {41, []float64{0.55}, 0}, {75, []float64{0.38}, 0}},
			full:    3,
		},
		{ // degenerative myelopathy, going down
			patient: exam.Patient{Name: "Hector", Species: exam.Dog, Breed: "Pembroke Welsh corgi", Sex: exam.Male, Neutered: true,
				Owner:        exam.Contact{Name: "Ana Silva", Phone: "01632 960 114"},
				Veterinarian: vet("Dr M. Sayer (demo)", "01632 960 121"),
				Problems:     []exam.Problem{{Diagnosis: "degenerative myelopathy, suspected"}},
				Goals:        []exam.Goal{{Words: "walks in the garden until summer", Item: "ambulation", Site: "midline", Target: 2}}},
			age: 10.1, kg: 14, unanswered: true, onset: 60, surgery: -1, last: 5, every: every(21, 13), truth: "T3-L3",
			lesions: []lesion{transverse("T8", "T13", 0.95, 1), {"L4", "S1", half{grey: 0.5}, half{grey: 0.5}}},
			phases:  []phase{{0, []float64{0.02, 0}, 0}, {60, []float64{0.22, 0}, 0}, {180, []float64{0.48, 0.1}, 0}, {340, []float64{0.9, 0.45}, 0}},
			full:    4,
			visit: func(n int, v *exam.Visit) {
				v.Report = exam.OwnerReport{Falls: []string{"none", "one on the stairs", "two a day", "many"}[min(n/4, 3)], Appetite: "normal"}
			},
		},
		{ // a brachial plexus injury
			patient: exam.Patient{Name: "Wren", Species: exam.Dog, Breed: "Crossbreed", Sex: exam.Female, Neutered: true,
				Owner:        exam.Contact{Name: "Bo Hale", Phone: "01632 960 115"},
				Veterinarian: vet("Dr P. Alder (demo)", "01632 960 120"),
				Problems:     []exam.Problem{{Diagnosis: "brachial plexus injury", Side: "left"}},
				Goals:        []exam.Goal{{Words: "left front limb bears weight", Item: "voluntary-motor", Site: "thoracic-left", Target: 2}}},
			age: 2.6, kg: 19, onset: 14, surgery: -1, last: 1, every: every(10, 10), truth: "peripheral", thoracic: true,
			lesions: []lesion{{"C7", "T1", half{root: 0.95}, half{}}},
			phases:  []phase{{14, []float64{1}, 0}, {45, []float64{0.95}, 0}, {90, []float64{0.72}, 0}, {120, []float64{0.6}, 0}},
			full:    3,
		},
		{ // a tail-pull injury
			patient: exam.Patient{Name: "Pepper", Species: exam.Cat, Breed: "Domestic shorthair", Sex: exam.Male, Neutered: true,
				Owner:        exam.Contact{Name: "Cy Marsh", Phone: "01632 960 116"},
				Veterinarian: vet("Dr M. Sayer (demo)", "01632 960 121"),
				Problems:     []exam.Problem{{Diagnosis: "tail-pull injury, sacrocaudal fracture", Level: "S3"}},
				Goals:        []exam.Goal{{Words: "empties the bladder on its own", Item: "voluntary-urination", Site: "midline", Target: 2}}},
			age: 3.1, kg: 4.6, onset: 5, surgery: -1, last: 3, every: weekly(8), truth: "L4-S3", temper: 0.06,
			lesions: []lesion{{"S2", "Cd5", half{root: 0.95}, half{root: 0.95}}}, painAt: exam.Sacrocaudal,
			phases: []phase{{5, []float64{1}, 2}, {19, []float64{0.85}, 1.4}, {40, []float64{0.55}, 0.5}, {65, []float64{0.35}, 0}},
			full:   3,
		},
		{ // a relapse in mid-course
			patient: exam.Patient{Name: "Tansy", Species: exam.Dog, Breed: "French bulldog", Sex: exam.Female,
				Owner:        exam.Contact{Name: "Di Okoro", Phone: "01632 960 117"},
				Veterinarian: vet("Dr P. Alder (demo)", "01632 960 120"),
				Problems:     []exam.Problem{{Diagnosis: "disc extrusion", Level: "L1-L2", Side: "right"}},
				Goals:        []exam.Goal{walks}},
			age: 4.2, kg: 11.5, unanswered: true, onset: 8, surgery: 2, last: 2, every: weekly(12), truth: "T3-L3",
			lesions: []lesion{transverse("L1", "L2", 0.86, 1)}, painAt: exam.Thoracolumbar,
			phases: []phase{{8, []float64{0.93}, 1.4}, {22, []float64{0.62}, 0.7}, {47, []float64{0.3}, 0}, {50, []float64{0.88}, 2.4},
				{64, []float64{0.75}, 1.2}, {92, []float64{0.42}, 0.3}},
			full: 4,
		},
		{ // a cat that reaches a plateau
			patient: exam.Patient{Name: "Mika", Species: exam.Cat, Breed: "Siamese", Sex: exam.Female, Neutered: true,
				Owner:        exam.Contact{Name: "Max Lindt", Phone: "01632 960 118"},
				Veterinarian: vet("Dr M. Sayer (demo)", "01632 960 121"),
				Problems:     []exam.Problem{{Diagnosis: "spinal cord infarct", Level: "T11-T12"}},
				Goals:        []exam.Goal{walks}},
			age: 9.4, kg: 3.9, onset: 10, surgery: -1, last: 5, every: weekly(10), truth: "T3-L3", temper: 0.04,
			lesions: []lesion{transverse("T11", "T12", 0.8, 0.95)},
			phases:  []phase{{10, []float64{0.85}, 0}, {31, []float64{0.52}, 0}, {38, []float64{0.48}, 0}, {90, []float64{0.47}, 0}},
			full:    4,
		},
		{ // neck pain alone, discharged
			patient: exam.Patient{Name: "Saffron", Species: exam.Dog, Breed: "Beagle", Sex: exam.Female, Neutered: true,
				Owner:        exam.Contact{Name: "Lou Prior", Phone: "01632 960 119"},
				Veterinarian: vet("Dr M. Sayer (demo)", "01632 960 121"),
				Problems:     []exam.Problem{{Diagnosis: "cervical disc disease", Level: "C3-C4"}}},
			age: 7, kg: 13, onset: 12, surgery: -1, last: 60, every: weekly(7), truth: "C1-C5", stop: "well",
			lesions: []lesion{{"C3", "C4", half{}, half{}}}, painAt: exam.Cervical,
			phases: []phase{{12, []float64{0}, 2.4}, {40, []float64{0}, 1}, {61, []float64{0}, 0}},
			full:   4,
		},
	}
}

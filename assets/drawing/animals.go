package drawing

var dog = animal(
	half(Point{50, 5}, Point{45.5, 6.5}, Point{44, 11}, Point{43.2, 18}, Point{39, 23}, Point{36.5, 29}, Point{37.5, 36}, Point{42, 42}, Point{50, 44}),
	spline(true, Point{40, 22.5}, Point{35, 22}, Point{30.5, 27}, Point{28.5, 36}, Point{30, 44}, Point{33.5, 45.5}, Point{36.5, 40}, Point{37.5, 32}),
	half(Point{50, 38}, Point{43, 40}, Point{40.5, 47}, Point{36, 54}, Point{33, 63}, Point{32.5, 76}, Point{33.5, 92}, Point{37, 108}, Point{38.6, 118}, Point{36.5, 129}, Point{34, 139}, Point{36, 150}, Point{43, 157}, Point{50, 158.5}),
	spline(true, Point{38, 56}, Point{31, 56.5}, Point{25.5, 60}, Point{22.8, 57}, Point{21.5, 49}, Point{21, 40}, Point{19.5, 34.5}, Point{15.5, 33}, Point{12, 36}, Point{12.3, 41}, Point{14.5, 48}, Point{14.8, 58}, Point{17, 67}, Point{22.5, 73}, Point{31, 76.5}, Point{37, 76}),
	spline(true, Point{39, 128}, Point{32, 123}, Point{24, 121}, Point{17.5, 124}, Point{15.5, 131}, Point{17.5, 139}, Point{19.5, 146}, Point{17, 155}, Point{13.5, 164}, Point{12.5, 171}, Point{15.5, 175.5}, Point{20, 174.5}, Point{22.5, 168}, Point{24.5, 157}, Point{27.5, 148.5}, Point{33, 150}, Point{40, 151}),
	spline(true, Point{46.8, 155}, Point{47.4, 166}, Point{48.6, 178}, Point{51.5, 188}, Point{55.5, 195.5}, Point{57.5, 195}, Point{56, 187}, Point{54.4, 177}, Point{53.4, 166}, Point{53.2, 155}),
	[]Path{
		spline(false, Point{43.4, 25}, Point{44.6, 23.8}, Point{46, 24.6}),
		spline(false, Point{48.2, 7.2}, Point{50, 8.6}, Point{51.8, 7.2}),
		spline(false, Point{14.6, 37.5}, Point{14.4, 34.8}), spline(false, Point{17.6, 37.8}, Point{17.6, 35}),
		spline(false, Point{15.4, 171}, Point{15.2, 173.8}), spline(false, Point{18.6, 170.6}, Point{18.8, 173.4}),
	},
	spline(false, Point{50, 48}, Point{50, 152}),
)

var cat = animal(
	half(Point{50, 13}, Point{45.5, 14.5}, Point{40.5, 19.5}, Point{37.6, 26}, Point{37.8, 34}, Point{42, 41}, Point{50, 43.5}),
	spline(true, Point{44.2, 16}, Point{40.5, 12.5}, Point{36.5, 9}, Point{36.5, 9}, Point{35.6, 15}, Point{36.4, 22}, Point{38.6, 26.5}),
	half(Point{50, 38}, Point{43.6, 40}, Point{42, 46}, Point{38, 54}, Point{36, 64}, Point{36.2, 78}, Point{37, 94}, Point{38.6, 108}, Point{39, 118}, Point{36.8, 128}, Point{35, 138}, Point{37.4, 148}, Point{44, 154}, Point{50, 155}),
	spline(true, Point{40, 55}, Point{33, 57}, Point{28.4, 60}, Point{26, 57}, Point{25.2, 49}, Point{24.8, 41}, Point{23.4, 36.5}, Point{20, 35.6}, Point{17.4, 38.4}, Point{17.6, 43}, Point{19, 50}, Point{19, 59}, Point{21, 67}, Point{26, 72.5}, Point{33, 75}, Point{39, 74.5}),
	spline(true, Point{39, 125}, Point{33, 119}, Point{25.5, 117}, Point{19.5, 120.5}, Point{18, 128}, Point{20.4, 136}, Point{22.6, 143}, Point{20.4, 152}, Point{17.4, 160}, Point{16.6, 167}, Point{19.4, 171}, Point{23.4, 170}, Point{25.4, 164}, Point{27, 154}, Point{30, 145.6}, Point{35, 147}, Point{41, 148.5}),
	spline(true, Point{47.4, 151.5}, Point{47.6, 162}, Point{48.4, 173}, Point{52, 184}, Point{58.5, 192.5}, Point{66.5, 196.5}, Point{70, 194}, Point{67, 191.6}, Point{60.5, 187}, Point{55.6, 179}, Point{53, 170}, Point{52.4, 161}, Point{52.6, 151.5}),
	[]Path{
		spline(false, Point{42.6, 23.4}, Point{44, 22}, Point{45.6, 22.8}),
		spline(false, Point{48.8, 15}, Point{50, 16.2}, Point{51.2, 15}),
		spline(false, Point{42, 17.6}, Point{35, 16.8}), spline(false, Point{41.6, 19.2}, Point{34.6, 20}),
		spline(false, Point{19.8, 39.4}, Point{19.6, 37}), spline(false, Point{22, 39.6}, Point{22, 37.2}),
		spline(false, Point{19.2, 166.8}, Point{19, 169.2}), spline(false, Point{22, 166.4}, Point{22.2, 169}),
	},
	spline(false, Point{50, 47}, Point{50, 149}),
)

// animal puts the parts together: limbs below the trunk, the head above it.
func animal(head, ear, trunk, thoracic, pelvic, tail Path, left []Path, back Path) Figure {
	f := Figure{Width: 100, Height: 200, Regions: []Region{
		{"tail", []Path{tail}},
		{"thoracic-left", []Path{thoracic}}, {"thoracic-right", []Path{mirror(thoracic)}},
		{"pelvic-left", []Path{pelvic}}, {"pelvic-right", []Path{mirror(pelvic)}},
		{"trunk", []Path{trunk}},
		{"head", []Path{head}},
		{"ears", []Path{ear, mirror(ear)}},
	}}
	f.Details = append(f.Details, back)
	for _, p := range left {
		f.Details = append(f.Details, p)
		if p.Points[0].X < 48 {
			f.Details = append(f.Details, mirror(p))
		}
	}
	return f
}

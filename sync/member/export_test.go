package member

import "cordwalk.example/cordwalk/sync/key"

// SetCost changes how hard a guess at a code is made and returns what it was.
func SetCost(c key.Stretch) key.Stretch {
	old := cost
	cost = c
	return old
}

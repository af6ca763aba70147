package exam

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestReferences(t *testing.T) {
	all := References()
	require.Greater(t, len(all), 250)
	for i, s := range all {
		require.NotEmpty(t, s.Text)
		require.NotContains(t, s.Key, " ", "a key is one word")
		got, ok := Reference(s.Key)
		require.True(t, ok)
		require.Equal(t, s.Text, got)
		if i > 0 {
			require.LessOrEqual(t, strings.ToLower(all[i-1].Key), strings.ToLower(s.Key))
		}
	}
	_, ok := Reference("Nobody-1900")
	require.False(t, ok)
	got := SourcesIn("Gomez-2015, counted on 20 sides; SAIM-1082: weak; from memory; Gomez-2015")
	require.Len(t, got, 2)
	require.Equal(t, "Gomez-2015", got[0].Key)
	require.Empty(t, SourcesIn("common practice"))
}

// Every row of the treatment and exercise tables names a publication or says what else it rests on.
func TestTreatmentsAreSourced(t *testing.T) {
	for _, k := range treatmentKinds {
		require.True(t, len(SourcesIn(k.Source)) > 0 || strings.Contains(k.Source, "common practice"), k.Key)
	}
	for _, k := range exerciseKinds {
		require.Contains(t, k.Source, "common practice", k.Key)
	}
}

package sheet

import (
	"bytes"
	"compress/gzip"
	"encoding/base64"
	"encoding/json"
	"os"
	"strings"
	"sync"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/santhosh-tekuri/jsonschema/v6"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"cordwalk.example/cordwalk/exam"
)

// fhirSchema compiles HL7's schema of FHIR R4 once; see testdata/fhir/README.md.
var fhirSchema = sync.OnceValues(func() (*jsonschema.Schema, error) {
	f, err := os.Open("testdata/fhir/fhir.schema.json.gz")
	if err != nil {
		return nil, err
	}
	defer f.Close()
	z, err := gzip.NewReader(f)
	if err != nil {
		return nil, err
	}
	doc, err := jsonschema.UnmarshalJSON(z)
	if err != nil {
		return nil, err
	}
	c := jsonschema.NewCompiler()
	if err := c.AddResource("fhir.json", doc); err != nil {
		return nil, err
	}
	return c.Compile("fhir.json")
})

// validFHIR checks a bundle, and where it is not valid each resource by itself: the errors
// are then short.
func validFHIR(data []byte) error {
	s, err := fhirSchema()
	if err != nil {
		return err
	}
	doc, err := jsonschema.UnmarshalJSON(bytes.NewReader(data))
	if err != nil {
		return err
	}
	whole := s.Validate(doc)
	if whole == nil {
		return nil
	}
	for _, e := range doc.(map[string]any)["entry"].([]any) {
		if err := s.Validate(e.(map[string]any)["resource"]); err != nil {
			return err
		}
	}
	return whole
}

// mapped is what of an animal a bundle carries: all but the record of what was sent. The weights of
// a patient are derived from those of the visits, which a bundle holds.
func mapped(a Animal) Animal {
	a.Patient.Weights, a.Patient.Sent = nil, nil
	return a
}

// TestFHIRIsValidAndLosesNothing: every bundle follows HL7's schema, comes back equal in every
// mapped field, and exports to the same bytes again.
func TestFHIRIsValidAndLosesNothing(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		r := Records{Made: anyTime(t)}
		r.Practice.Name = rapid.SampledFrom([]string{"", "Riverbend Animal Rehabilitation"}).Draw(t, "practice")
		for range rapid.IntRange(1, 2).Draw(t, "animals") {
			a := anyAnimal(t)
			for i := range a.Visits {
				// Coordinated times of a bundle may not have an empty tail of blanks in a text.
				a.Visits[i].Examiner = strings.TrimSpace(a.Visits[i].Examiner)
			}
			sortVisits(a.Visits)
			r.Animals = append(r.Animals, mapped(a))
		}
		var first bytes.Buffer
		if err := EncodeFHIR(&first, r, nil); err != nil {
			t.Fatal(err)
		}
		if err := validFHIR(first.Bytes()); err != nil {
			t.Fatal(err)
		}
		back, warnings, err := DecodeFHIR(bytes.NewReader(first.Bytes()))
		if err != nil || len(warnings) > 0 {
			t.Fatal(err, warnings)
		}
		if d := cmp.Diff(r, back, sameRecords); d != "" {
			t.Fatal(d)
		}
		var second bytes.Buffer
		if err := EncodeFHIR(&second, back, nil); err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(first.Bytes(), second.Bytes()) {
			t.Fatal("two exports differ")
		}
	})
}

func sortVisits(v []exam.Visit) {
	for i := 1; i < len(v); i++ {
		for j := i; j > 0 && v[j].Examined.Before(v[j-1].Examined); j-- {
			v[j], v[j-1] = v[j-1], v[j]
		}
	}
}

// TestTheSchemaCatches shows that the schema in use can fail: a missing code, an unknown
// field, a bad status and a bad date are refused.
func TestTheSchemaCatches(t *testing.T) {
	var buf bytes.Buffer
	in := patients()["recovery"]
	require.NoError(t, EncodeFHIR(&buf, Records{Animals: []Animal{{in.Patient, in.Visits}}}, nil))
	require.NoError(t, validFHIR(buf.Bytes()))
	for _, tt := range [][2]string{
		{`"status": "preliminary"`, `"status": "guessed"`},
		{`"birthDate": "2019-05"`, `"birthDate": "May 2019"`},
		{`"valueCodeableConcept"`, `"valueCodableConcept"`},
		{`"resourceType": "Encounter",`, `"resourceType": "Encounter", "colour": "red",`},
	} {
		require.Contains(t, buf.String(), tt[0])
		assert.Error(t, validFHIR([]byte(strings.Replace(buf.String(), tt[0], tt[1], 1))), tt[1])
	}
}

func TestFHIRCarriesThePaper(t *testing.T) {
	in := patients()["recovery"]
	doc, err := Owner(in)
	require.NoError(t, err)
	var buf bytes.Buffer
	require.NoError(t, EncodeFHIR(&buf, Records{Practice: in.Practice, Animals: []Animal{{in.Patient, in.Visits}}}, []Report{{in.last().ID, "Progress sheet", doc.PDF}}))
	require.NoError(t, validFHIR(buf.Bytes()))
	assert.Contains(t, buf.String(), base64.StdEncoding.EncodeToString(doc.PDF))
	var b struct {
		Entry []struct {
			Resource struct {
				ResourceType string `json:"resourceType"`
			} `json:"resource"`
		} `json:"entry"`
	}
	require.NoError(t, json.Unmarshal(buf.Bytes(), &b))
	count := map[string]int{}
	for _, e := range b.Entry {
		count[e.Resource.ResourceType]++
	}
	assert.Equal(t, 1, count["DiagnosticReport"])
	assert.Equal(t, len(in.Visits), count["Encounter"])
	assert.Equal(t, len(in.Visits), count["Provenance"])
	_, warnings, err := DecodeFHIR(bytes.NewReader(buf.Bytes()))
	require.NoError(t, err)
	assert.Empty(t, warnings)
}

func TestFHIRFromElsewhere(t *testing.T) {
	_, warnings, err := DecodeFHIR(strings.NewReader(`{"resourceType":"Bundle","type":"collection","entry":[
		{"fullUrl":"urn:uuid:01000000-0000-0000-0000-000000000001","resource":{"resourceType":"Patient","id":"01000000-0000-0000-0000-000000000001","name":[{"text":"Rex"}],
		 "extension":[{"url":"http://hl7.org/fhir/StructureDefinition/patient-animal","extension":[{"url":"species","valueCodeableConcept":{"coding":[{"system":"http://hl7.org/fhir/animal-species","code":"canislf"}]}}]}]}},
		{"resource":{"resourceType":"Immunization","id":"x"}},
		{"resource":{"resourceType":"Observation","id":"y","encounter":{"reference":"Encounter/none"}}}]}`))
	require.NoError(t, err)
	assert.Equal(t, []string{"left out: Immunization (1)", "left out: Observation of a visit that is not in the bundle (1)"}, warnings)
	for _, bad := range []string{`{}`, `[`, `{"resourceType":"Patient"}`, `{"resourceType":"Bundle","entry":[{"resource":{"resourceType":"Patient","id":"x"}}]}`} {
		_, _, err := DecodeFHIR(strings.NewReader(bad))
		assert.ErrorContains(t, err, "reading the FHIR bundle", bad)
	}
}

func FuzzDecodeFHIR(f *testing.F) {
	var good bytes.Buffer
	in := patients()["recovery"]
	if err := EncodeFHIR(&good, Records{Animals: []Animal{{in.Patient, in.Visits}}}, nil); err != nil {
		f.Fatal(err)
	}
	f.Add(good.Bytes())
	f.Fuzz(func(t *testing.T, b []byte) {
		r, _, err := DecodeFHIR(bytes.NewReader(b))
		if err == nil {
			if err := EncodeFHIR(&bytes.Buffer{}, r, nil); err != nil {
				t.Fatal(err)
			}
		}
	})
}

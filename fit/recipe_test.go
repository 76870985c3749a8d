package fit

import (
	"encoding/json"
	"reflect"
	"strings"
	"testing"
)

func TestRecipeRoundTrip(t *testing.T) {
	text, err := json.MarshalIndent(Graphene(), "", "  ")
	if err != nil {
		t.Fatal(err)
	}
	got, err := ReadRecipe(strings.NewReader(string(text)))
	if err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(got, Graphene()) {
		t.Errorf("read back as %+v", got)
	}
}

func TestRecipeRefusals(t *testing.T) {
	text, err := json.Marshal(Graphene())
	if err != nil {
		t.Fatal(err)
	}
	for _, test := range []struct{ old, with, want string }{
		{`"poor_fit"`, `"poor_fitt"`, "poor_fitt"},
		{`"lorentzian"`, `"lorenzian"`, "lorenzian"},
		{`"position_cm-1":1341`, `"position_cm-1":134`, "outside the window"},
		{`"name":"dprime"`, `"name":"d"`, "twice"},
		{`"name":"dprime"`, `"name":"../d"`, "small letters"},
		{`"background_order":1`, `"background_order":9`, "background_order"},
		{`"width_range_cm-1":[6,200]`, `"width_range_cm-1":[200,6]`, "rising"},
		{`"denominator":"g"`, `"denominator":"q"`, "not a band"},
		{`"spike_threshold":6`, `"spike_threshold":1`, "spike_threshold"},
		{`"reference_laser_nm":532`, `"reference_laser_nm":0`, "reference_laser_nm"},
		{`}`, ``, "unexpected EOF"},
	} {
		bad := strings.Replace(string(text), test.old, test.with, 1)
		if test.with == "" {
			bad = strings.TrimSuffix(string(text), test.old)
		}
		if bad == string(text) {
			t.Fatalf("%s is not in the recipe", test.old)
		}
		if _, err := ReadRecipe(strings.NewReader(bad)); err == nil || !strings.Contains(err.Error(), test.want) {
			t.Errorf("%s -> %s: error %v, want one with %q", test.old, test.with, err, test.want)
		}
	}
	if _, err := ReadRecipe(strings.NewReader(string(text) + "{}")); err == nil {
		t.Error("two recipes in one file were accepted")
	}
}

func FuzzReadRecipe(f *testing.F) {
	text, _ := json.Marshal(Graphene())
	f.Add(string(text))
	f.Add(`{"windows":[{}]}`)
	f.Fuzz(func(t *testing.T, data string) {
		recipe, err := ReadRecipe(strings.NewReader(data))
		if err != nil {
			return
		}
		// What is accepted can be used: a plan on a wide axis either works or says why, and never panics.
		_, _ = NewPlan(recipe, evenAxis(100, 3500, 2), 532, Detector{})
	})
}

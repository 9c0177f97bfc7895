package document

import (
	"encoding/json"
	"reflect"
	"strings"
	"testing"

	"github.com/santhosh-tekuri/jsonschema/v6"

	"lotgate/limits/quantity"
)

type inner struct {
	Gain quantity.Ratio `key:"gain" need:"yes" range:">0" doc:"a gain"`
}

type sample struct {
	Name    string               `key:"name" need:"yes" doc:"its name"`
	Mode    string               `key:"mode" among:"slow|fast" doc:"how"`
	Supply  quantity.Voltage     `key:"supply" range:">=0" doc:"a voltage"`
	Band    []quantity.Frequency `key:"band" range:">0" doc:"edges"`
	Count   int                  `key:"count" range:">0" doc:"how many"`
	Lid     bool                 `key:"lid" doc:"honoured"`
	Inputs  map[string]inner     `key:"inputs" doc:"inputs"`
	Further *inner               `key:"further" doc:"optional"`
}

const good = `name: bench
mode: fast
supply: 5.00 V
band: [10 Hz, 1 kHz]
count: 3
lid: yes
inputs: {if: {gain: 200}}
further: &g {gain: 0.4 %}
`

func TestReadAndWriteAreInverse(t *testing.T) {
	var s sample
	if err := Read("f.yaml", []byte(good), &s); err != nil {
		t.Fatal(err)
	}
	if s.Supply != 5 || s.Band[1] != 1000 || !s.Lid || s.Inputs["if"].Gain != 200 || s.Further.Gain != 0.004 {
		t.Errorf("read %+v", s)
	}
	text, err := Write(s)
	if err != nil {
		t.Fatal(err)
	}
	var again sample
	if err := Read("f.yaml", text, &again); err != nil {
		t.Fatalf("%v in\n%s", err, text)
	}
	if !reflect.DeepEqual(s, again) {
		t.Errorf("%+v became %+v by\n%s", s, again, text)
	}
}

func TestReadRefuses(t *testing.T) {
	for _, c := range []struct{ name, text, want string }{
		{"unknown key", "name: x\ncolour: red", `f.yaml:2: unknown key "colour" in this mapping: one of name, mode, supply, band, count, lid, inputs, further`},
		{"missing key", "mode: fast", `f.yaml:1: this mapping has no key "name": its name`},
		{"twice", "name: x\nname: y", `f.yaml:2: the key "name" stands here twice: keep one of them`},
		{"wrong dimension", "name: x\nsupply: 5 mA", `f.yaml:2: supply "5 mA" is a current: write a voltage, such as 5 V`},
		{"impossible value", "name: x\nsupply: -5 V", `f.yaml:2: supply "-5 V" is not possible: write zero or more, such as 5 V`},
		{"list for a value", "name: x\nsupply: [5 V]", `f.yaml:2: supply is a list: write a voltage, such as 5 V`},
		{"value for a list", "name: x\nband: 10 Hz", `f.yaml:2: band is a single value: write a list`},
		{"value for a mapping", "name: x\nfurther: 3", `f.yaml:2: further is a single value: write a mapping with the keys gain`},
		{"unknown word", "name: x\nmode: medium", `f.yaml:2: mode "medium" is not known: one of slow, fast`},
		{"fraction", "name: x\ncount: 1.5", `f.yaml:2: count "1.5" is not possible: write a whole number of 1 or more`},
		{"no yes", "name: x\nlid: maybe", `f.yaml:2: lid "maybe" is neither yes nor no: write yes or no`},
		{"deep", "name: x\ninputs:\n  if:\n    gain: 0", `f.yaml:4: gain "0" is not possible: write a value above zero, such as 200`},
		{"empty", "", `f.yaml: the file is empty: write a mapping, see lotgate schema`},
		{"two mistakes in order", "mode: medium\nname: x\nsupply: 1 A", "f.yaml:1: mode \"medium\" is not known: one of slow, fast\nf.yaml:3: supply \"1 A\" is a current: write a voltage, such as 5 V"},
	} {
		t.Run(c.name, func(t *testing.T) {
			var s sample
			err := Read("f.yaml", []byte(c.text), &s)
			if err == nil || err.Error() != c.want {
				t.Errorf("got  %v\nwant %s", err, c.want)
			}
		})
	}
	var s sample
	if err := Read("f.yaml", []byte("name: [x\n"), &s); err == nil || !strings.HasPrefix(err.Error(), "f.yaml:") || !strings.Contains(err.Error(), "YAML") {
		t.Errorf("broken YAML gave %v", err)
	}
}

// TestSchemaAgreesWithTheReader: what the reader accepts the schema accepts, what the
// reader refuses for its keys the schema refuses, and both know the same keys.
func TestSchemaAgreesWithTheReader(t *testing.T) {
	text, err := Schema("sample", sample{})
	if err != nil {
		t.Fatal(err)
	}
	doc, err := jsonschema.UnmarshalJSON(strings.NewReader(string(text)))
	if err != nil {
		t.Fatal(err)
	}
	c := jsonschema.NewCompiler()
	if err := c.AddResource("s.json", doc); err != nil {
		t.Fatal(err)
	}
	s, err := c.Compile("s.json")
	if err != nil {
		t.Fatal(err)
	}
	accepts := func(text string) bool {
		v, err := jsonschema.UnmarshalJSON(strings.NewReader(text))
		if err != nil {
			t.Fatal(err)
		}
		return s.Validate(v) == nil
	}
	if !accepts(`{"name": "bench", "mode": "fast", "supply": "5.00 V", "band": ["10 Hz"], "count": 3, "inputs": {"if": {"gain": 200}}}`) {
		t.Error("the schema refuses a good document")
	}
	for _, bad := range []string{`{"mode": "fast"}`, `{"name": "x", "colour": "red"}`, `{"name": "x", "mode": "medium"}`, `{"name": "x", "inputs": {"if": {"gian": 1}}}`} {
		if accepts(bad) {
			t.Errorf("the schema accepts %s", bad)
		}
	}
	var top struct {
		Properties map[string]any `json:"properties"`
	}
	if err := json.Unmarshal(text, &top); err != nil {
		t.Fatal(err)
	}
	for _, k := range KeysOf[sample]() {
		if top.Properties[k] == nil {
			t.Errorf("the schema does not know the key %q", k)
		}
	}
}

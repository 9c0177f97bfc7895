package plan

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/santhosh-tekuri/jsonschema/v6"
	"gopkg.in/yaml.v3"
)

const head = "plan: p\nrevision: 1\nmodule: {kind: single IF, carrier: 10.525 GHz}\nlimits: l.yaml\nsteps:\n"

func starterPlan(t *testing.T) []byte {
	t.Helper()
	data, err := os.ReadFile(filepath.Join("..", "starter", "plan.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	return data
}

func TestStarterPlan(t *testing.T) {
	p, err := Parse("plan.yaml", starterPlan(t))
	if err != nil {
		t.Fatal(err)
	}
	if p.Retry != (Retry{2, 1, "fail"}) || len(p.Steps) != 7 || p.Steps[6].ID != "supply_current_low" || float64(*p.Steps[6].Supply) != 4.75 {
		t.Errorf("%+v", p)
	}
	d, err := p.Describe(nil)
	if err != nil {
		t.Fatal(err)
	}
	// 1.5 settle + 0.6 current + 6.2 noise + 2.6 sensitivity + 4.5 response + 1.1 low current.
	if d.Least < 16.4 || d.Least > 16.6 || len(d.Lines) != 8 {
		t.Errorf("%v s, %d lines: %v", d.Least, len(d.Lines), d.Lines)
	}
	if _, curve, known := p.UnitOf("response.curve"); !curve || !known {
		t.Error("response.curve is not known as a curve")
	}
	if u, _, known := p.UnitOf("noise_floor.density(1 kHz)"); !known || u.Symbol != "V/√Hz" {
		t.Errorf("the density has the unit %v", u)
	}
}

func TestParseRefuses(t *testing.T) {
	for _, c := range []struct{ name, steps, want string }{
		{"unknown step", "  - sing: loud\n", "p.yaml:6: a step has none of the keys ask, supply, measure: write - ask: …, - supply: … or - measure: …"},
		{"unknown measurement", "  - supply: 5 V\n  - measure: magic\n", `p.yaml:7: measurement "magic" is not known: one of carrier distortion noise_floor pushing quadrature response sensitivity startup supply_current supply_rejection`},
		{"unknown parameter", "  - supply: 5 V\n  - {measure: supply_current, volume: 11}\n", `p.yaml:7: unknown key "volume" in this mapping: one of acquire, using`},
		{"wrong dimension", "  - supply: 5 mA\n", `p.yaml:6: supply "5 mA" is a current: write a voltage, such as 5 V`},
		{"unpowered", "  - measure: supply_current\n", "p.yaml:6: supply_current comes before the supply is on: write - supply: … before it"},
		{"same name", "  - supply: 5 V\n  - measure: supply_current\n  - measure: supply_current\n", `p.yaml:8: two steps are called "supply_current": give one of them an id of its own`},
		{"odd name", "  - supply: 5 V\n  - {measure: supply_current, id: a.b}\n", `p.yaml:7: the id "a.b" has a dot, a slash or a space: write letters, digits and _ only`},
		{"nothing measured", "  - supply: 5 V\n", "p.yaml: the plan measures nothing: write at least one step - measure: …"},
		{"impossible band", "  - supply: 5 V\n  - {measure: noise_floor, band: [1 kHz, 10 Hz]}\n", "p.yaml:7: noise_floor: band [1 kHz 10 Hz] is not possible: write [lower edge, upper edge], such as [10 Hz, 1 kHz]"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := Parse("p.yaml", []byte(head+c.steps))
			if err == nil || err.Error() != c.want {
				t.Errorf("got  %v\nwant %s", err, c.want)
			}
		})
	}
}

func TestLimitsMustBelongToThePlan(t *testing.T) {
	dir := t.TempDir()
	write := func(name, text string) {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	write("p.yaml", head+"  - supply: 5 V\n  - measure: supply_current\n")
	p, err := Read(filepath.Join(dir, "p.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	if _, _, err := p.ReadLimits(); err == nil || !strings.Contains(err.Error(), "correct limits: in the plan") {
		t.Errorf("missing limits gave %v", err)
	}
	write("l.yaml", "limits: l\nrevision: 1\nreadings:\n  startup: {upper: 1 s}\n")
	if _, _, err := p.ReadLimits(); err == nil || !strings.Contains(err.Error(), `gives a reading "startup": one of supply_current`) {
		t.Errorf("a limit on nothing gave %v", err)
	}
	write("l.yaml", "limits: l\nrevision: 1\nreadings:\n  supply_current: {upper: 40 mV}\n")
	if _, _, err := p.ReadLimits(); err == nil || !strings.Contains(err.Error(), "l.yaml:4: supply_current: upper \"40 mV\" is a voltage") {
		t.Errorf("a wrong dimension gave %v", err)
	}
}

// TestSchemaKnowsPlans: the schema accepts the starter plan and refuses what the reader refuses.
func TestSchemaKnowsPlans(t *testing.T) {
	text, err := Schema()
	if err != nil {
		t.Fatal(err)
	}
	doc, err := jsonschema.UnmarshalJSON(strings.NewReader(string(text)))
	if err != nil {
		t.Fatal(err)
	}
	c := jsonschema.NewCompiler()
	if err := c.AddResource("plan.json", doc); err != nil {
		t.Fatal(err)
	}
	s, err := c.Compile("plan.json")
	if err != nil {
		t.Fatal(err)
	}
	validate := func(text []byte) error {
		var v any
		if err := yaml.Unmarshal(text, &v); err != nil {
			t.Fatal(err)
		}
		return s.Validate(v)
	}
	if err := validate(starterPlan(t)); err != nil {
		t.Errorf("the schema refuses the starter plan: %v", err)
	}
	for _, bad := range []string{"  - {measure: supply_current, volume: 11}\n", "  - sing: loud\n"} {
		if validate([]byte(head+bad)) == nil {
			t.Errorf("the schema accepts %q", bad)
		}
	}
}

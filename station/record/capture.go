package record

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"sort"
	"strings"

	"gopkg.in/yaml.v3"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/document"
	"lotgate/station/measure"
	"lotgate/station/record/wav"
)

// Folder is a capture folder: capture.yaml and a WAV file for each acquisition.
type Folder struct {
	Version    int                `key:"version" need:"yes" range:">0" doc:"version of this format: 1"`
	Lot        string             `key:"lot" doc:"lot"`
	Serial     string             `key:"serial" need:"yes" doc:"serial number of the unit"`
	Station    string             `key:"station" doc:"station"`
	Plan       string             `key:"plan" doc:"plan"`
	Attempt    string             `key:"attempt" doc:"the attempt's identifier in the store"`
	Started    string             `key:"started" doc:"RFC 3339 time"`
	SampleRate quantity.Frequency `key:"sample_rate" need:"yes" range:">0" doc:"sample rate of all recordings"`
	Carrier    quantity.Frequency `key:"carrier" need:"yes" range:">0" doc:"nominal carrier of the module"`
	Recordings []entry            `key:"recordings" need:"yes" doc:"one entry per step"`

	Captures []*measure.Capture
}

// FolderVersion is the version of the capture folder's format.
const FolderVersion = 1

// CaptureFile is the name of a capture folder's description.
const CaptureFile = "capture.yaml"

// entry is one recording's conditions and its measurement's parameters.
type entry struct {
	conditions measure.Conditions
	parameters measure.Measurement
	line       int
}

// ReadNode splits an entry's keys between the conditions and the measurement.
func (e *entry) ReadNode(r *document.Reader, n *yaml.Node) {
	e.line = n.Line
	if n.Kind != yaml.MappingNode {
		r.Fail(n, "a recording is not a mapping", "write step:, measure:, file: …")
		return
	}
	conditions, parameters := *n, *n
	conditions.Content, parameters.Content = nil, nil
	own := map[string]bool{}
	for _, k := range document.KeysOf[measure.Conditions]() {
		own[k] = true
	}
	kind := ""
	for i := 0; i+1 < len(n.Content); i += 2 {
		if n.Content[i].Value == "measure" {
			kind = n.Content[i+1].Value
		}
		if own[n.Content[i].Value] {
			conditions.Content = append(conditions.Content, n.Content[i], n.Content[i+1])
		} else {
			parameters.Content = append(parameters.Content, n.Content[i], n.Content[i+1])
		}
	}
	r.Node(&conditions, &e.conditions)
	m, err := measure.New(kind)
	if err != nil {
		if kind != "" {
			r.Fail(n, err.Error(), "")
		}
		return
	}
	e.parameters = m
	r.Struct(&parameters, m)
}

// Schema describes an entry.
func (e entry) Schema() map[string]any { return document.TypeOf[measure.Conditions]() }

// ReadFolder reads a capture folder whole: description and samples.
func ReadFolder(dir string) (*Folder, error) {
	file := filepath.Join(dir, CaptureFile)
	data, err := os.ReadFile(file)
	if err != nil {
		return nil, fmt.Errorf("%s is no capture folder: %w: name a folder that holds %s", dir, err, CaptureFile)
	}
	var f Folder
	if err := document.Read(file, data, &f); err != nil {
		return nil, err
	}
	if f.Version != FolderVersion {
		return nil, &document.Error{File: file, Line: 1, What: fmt.Sprintf("version %d is not known", f.Version), Expected: fmt.Sprintf("version %d", FolderVersion)}
	}
	byStep := map[string]*measure.Capture{}
	for i := range f.Recordings {
		e := &f.Recordings[i]
		fail := func(what, expected string) error {
			return &document.Error{File: file, Line: e.line, What: what, Expected: expected}
		}
		c := &measure.Capture{Conditions: e.conditions, Parameters: e.parameters}
		if byStep[c.Step] != nil {
			return nil, fail(fmt.Sprintf("the step %q stands here twice", c.Step), "give each step its own name")
		}
		if c.Carrier == 0 {
			c.Carrier = f.Carrier
		}
		if err := f.load(dir, c); err != nil {
			var w *wav.Error
			if errors.As(err, &w) {
				return nil, err
			}
			return nil, fail(fmt.Sprintf("step %s: %v", c.Step, err), "correct the entry, or copy the folder again")
		}
		byStep[c.Step] = c
		f.Captures = append(f.Captures, c)
	}
	for i, c := range f.Captures {
		if c.StationFloor == "" {
			continue
		}
		floor := byStep[c.StationFloor]
		if floor == nil || floor == c {
			return nil, &document.Error{File: file, Line: f.Recordings[i].line, What: fmt.Sprintf("step %s: there is no step %q to take the station's floor from", c.Step, c.StationFloor), Expected: "name the step that was recorded with the supply off"}
		}
		c.Floor = floor
	}
	return &f, nil
}

// load reads an entry's WAV files.
func (f *Folder) load(dir string, c *measure.Capture) error {
	files := []string{c.File}
	if len(c.Parts) > 0 {
		files = nil
		for _, p := range c.Parts {
			files = append(files, p.File)
		}
		if c.File != "" {
			return errors.New("it has both file and parts: keep one of them")
		}
	}
	if c.Reported != nil && c.File == "" && len(c.Parts) == 0 {
		return nil
	}
	roles := make([]string, 0, len(c.Inputs))
	for role := range c.Inputs {
		roles = append(roles, role)
	}
	if len(roles) == 0 {
		return errors.New("inputs are not given: write inputs: {if: 1}")
	}
	sort.Strings(roles)
	channels := make([]int, len(roles))
	for i, role := range roles {
		channels[i] = c.Inputs[role]
	}
	buffer := fileBuffers.take()
	defer func() { fileBuffers.give(buffer) }()
	for _, name := range files {
		if name == "" {
			return errors.New("no file is given: write file: or parts:")
		}
		if !filepath.IsLocal(name) || strings.ContainsAny(name, `/\`) {
			return fmt.Errorf("the file %q lies outside the folder: name a file beside %s", name, CaptureFile)
		}
		path := filepath.Join(dir, name)
		data, err := readInto(buffer, path)
		if err != nil {
			return err
		}
		buffer = data
		format, samples, err := wav.Decode(path, data, channels)
		if err != nil {
			return err
		}
		if float64(format.Rate) != float64(f.SampleRate) {
			return fmt.Errorf("%s has a sample rate of %d Hz and %s says %v: correct the one that is wrong", name, format.Rate, CaptureFile, f.SampleRate)
		}
		signals := map[string]measure.Signal{}
		for i, role := range roles {
			signals[role] = measure.Signal{Samples: samples[i], Rate: float64(format.Rate)}
		}
		c.Signals = append(c.Signals, signals)
	}
	return nil
}

// Release gives the samples back for the next folder; the captures are of no use after it.
func (f *Folder) Release() {
	for _, c := range f.Captures {
		for _, signals := range c.Signals {
			for _, s := range signals {
				wav.GiveBack(s.Samples)
			}
		}
	}
	f.Captures = nil
}

package record

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strconv"

	"gopkg.in/yaml.v3"

	"lotgate/limits/quantity/document"
	"lotgate/station/measure"
	"lotgate/station/record/wav"
)

// WriteNode writes an entry: conditions, then the measurement's parameters.
func (e entry) WriteNode() (*yaml.Node, error) {
	n, err := document.StructNode(e.conditions)
	if err != nil {
		return nil, err
	}
	p, err := document.StructNode(e.parameters)
	if err != nil {
		return nil, err
	}
	own := map[string]bool{}
	for _, k := range document.KeysOf[measure.Conditions]() {
		own[k] = true
	}
	for i := 0; i+1 < len(p.Content); i += 2 {
		if !own[p.Content[i].Value] {
			n.Content = append(n.Content, p.Content[i], p.Content[i+1])
		}
	}
	n.Style = 0
	return n, nil
}

// WriteFolder writes an attempt's captures into a new folder below parent, named after the
// unit, and gives its path. Samples are kept as 32-bit float, or as they came from a
// converter of up to 24 bits. Nothing that exists is touched; the folder appears under its
// name only when it is whole.
func WriteFolder(parent string, f *Folder) (string, error) {
	if err := os.MkdirAll(parent, 0o755); err != nil {
		return "", fmt.Errorf("the folder for captures cannot be made: %w", err)
	}
	temp, err := os.MkdirTemp(parent, ".unfinished-")
	if err != nil {
		return "", fmt.Errorf("captures cannot be written: %w", err)
	}
	defer os.RemoveAll(temp) // gone already where all went well
	f.Recordings = nil
	written := map[*measure.Capture]bool{}
	for _, c := range f.Captures {
		if written[c] {
			continue
		}
		written[c] = true
		e, err := writeSamples(temp, c)
		if err != nil {
			return "", err
		}
		f.Recordings = append(f.Recordings, e)
	}
	text, err := document.Write(f)
	if err != nil {
		return "", err
	}
	if err := WriteFile(filepath.Join(temp, CaptureFile), text); err != nil {
		return "", err
	}
	if err := os.Chmod(temp, 0o755); err != nil {
		return "", err
	}
	for n := 1; n < 10000; n++ {
		name := SafeName(f.Serial)
		if n > 1 {
			name += "-" + strconv.Itoa(n)
		}
		dir := filepath.Join(parent, name)
		if _, err := os.Lstat(dir); err == nil {
			continue
		}
		switch err := os.Rename(temp, dir); {
		case err == nil:
			return dir, syncFolder(parent)
		case errors.Is(err, os.ErrExist):
		default:
			return "", err
		}
	}
	return "", fmt.Errorf("%s holds too many captures of unit %s: move some away", parent, f.Serial)
}

// writeSamples writes a capture's WAV files and gives its entry.
func writeSamples(dir string, c *measure.Capture) (entry, error) {
	e := entry{conditions: c.Conditions, parameters: c.Parameters}
	e.conditions.Parts = append([]measure.Part(nil), c.Parts...)
	e.conditions.Inputs = map[string]int{}
	for i, signals := range c.Signals {
		name := c.Step + ".wav"
		if len(c.Signals) > 1 {
			name = fmt.Sprintf("%s-%d.wav", c.Step, i+1)
		}
		format := wav.Format{Bits: 32, Float: true}
		var channels [][]float64
		for _, role := range measure.Roles() {
			if s, ok := signals[role]; ok {
				channels = append(channels, s.Samples)
				format.Rate = int(s.Rate)
				e.conditions.Inputs[role] = len(channels)
			}
		}
		format.Channels = len(channels)
		data, err := wav.Encode(format, channels)
		if err != nil {
			return e, fmt.Errorf("step %s: %w", c.Step, err)
		}
		if err := WriteFile(filepath.Join(dir, name), data); err != nil {
			return e, err
		}
		if len(e.conditions.Parts) > 0 {
			e.conditions.Parts[i].File = name
		} else {
			e.conditions.File = name
		}
	}
	return e, nil
}

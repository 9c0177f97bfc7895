package record

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"unicode"
)

// WriteFile writes a whole file so that it is either there complete or not at all: a
// temporary file beside it, synced, renamed, and the folder synced.
func WriteFile(path string, data []byte) error {
	dir := filepath.Dir(path)
	f, err := os.CreateTemp(dir, ".unfinished-")
	if err != nil {
		return fmt.Errorf("%s cannot be written: %w: check the folder's rights and the space left", path, err)
	}
	name := f.Name()
	fail := func(err error) error {
		f.Close()
		os.Remove(name)
		return fmt.Errorf("%s cannot be written: %w: check the folder's rights and the space left", path, err)
	}
	if _, err := f.Write(data); err != nil {
		return fail(err)
	}
	if err := f.Chmod(0o644); err != nil {
		return fail(err)
	}
	if err := f.Sync(); err != nil {
		return fail(err)
	}
	if err := f.Close(); err != nil {
		return fail(err)
	}
	if err := os.Rename(name, path); err != nil {
		return fail(err)
	}
	return syncFolder(dir)
}

// WriteNew writes a whole file under a name that is free: path itself, or with a number
// before its ending. It gives the name used; what exists is never overwritten.
func WriteNew(path string, data []byte) (string, error) {
	ending := filepath.Ext(path)
	base := strings.TrimSuffix(path, ending)
	for n := 1; n < 100000; n++ {
		name := path
		if n > 1 {
			name = fmt.Sprintf("%s-%d%s", base, n, ending)
		}
		// The empty file holds the name against another process until the rename.
		f, err := os.OpenFile(name, os.O_CREATE|os.O_EXCL|os.O_WRONLY, 0o644)
		if os.IsExist(err) {
			continue
		}
		if err != nil {
			return "", fmt.Errorf("%s cannot be written: %w: check the folder's rights and the space left", name, err)
		}
		f.Close()
		if err := WriteFile(name, data); err != nil {
			os.Remove(name)
			return "", err
		}
		return name, nil
	}
	return "", fmt.Errorf("no free name is left for %s: move some of its like away", path)
}

// syncFolder makes a rename in a folder durable, where the system can.
func syncFolder(dir string) error {
	d, err := os.Open(dir)
	if err != nil {
		return err
	}
	defer d.Close()
	_ = d.Sync() // some systems cannot sync a folder and say so; the file itself is synced
	return nil
}

// longestName is the longest file name that is made of a serial number or a lot, bytes.
const longestName = 120

// SafeName turns any text into a file name that is the text itself where it is harmless.
// Different texts give different names on file systems that tell case apart: every character
// but letters, digits, '_' and '-' (and '.' inside) becomes its code in braces, and what is
// too long is cut and given its hash.
func SafeName(s string) string {
	var out strings.Builder
	for i, c := range s {
		ok := c == '_' || c == '-' || c == '.' && i > 0 && i < len(s)-1 || c < unicode.MaxASCII && (unicode.IsLetter(c) || unicode.IsDigit(c))
		if ok {
			out.WriteRune(c)
			continue
		}
		fmt.Fprintf(&out, "{%x}", c)
	}
	name := out.String()
	if name == "" {
		name = "{}"
	}
	if len(name) > longestName {
		name = name[:longestName-20] + "{" + hashOf([]byte(s))[:16] + "}"
	}
	return name
}

package starter

import (
	"os"
	"path/filepath"
	"testing"
)

func TestWriteTouchesNothingThatExists(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "new")
	names, err := Write(dir, map[string][]byte{"more.yaml": []byte("more")})
	if err != nil || len(names) != len(Names)+1 {
		t.Fatalf("%v, %v", names, err)
	}
	for _, n := range Names {
		data, err := os.ReadFile(filepath.Join(dir, n))
		if err != nil || string(data) != string(Content(n)) {
			t.Errorf("%s: %v", n, err)
		}
	}
	if err := os.Remove(filepath.Join(dir, Names[0])); err != nil {
		t.Fatal(err)
	}
	if _, err := Write(dir, nil); err == nil {
		t.Error("a folder with files of the same name was written to")
	}
	if _, err := os.Stat(filepath.Join(dir, Names[0])); !os.IsNotExist(err) {
		t.Error("something was written all the same")
	}
}

package reports

import (
	"flag"
	"os"
	"path/filepath"
	"testing"
)

var pictures = flag.String("pictures", "", "folder to write the sample certificates to, to look at")

// TestPictures writes every sample certificate where -pictures says.
func TestPictures(t *testing.T) {
	if *pictures == "" {
		t.Skip("no folder given: run with -pictures <folder> to look at the certificates")
	}
	for name, c := range samples() {
		f, err := os.Create(filepath.Join(*pictures, name+".pdf"))
		if err != nil {
			t.Fatal(err)
		}
		if err := WriteCertificate(f, c); err != nil {
			t.Errorf("%s: %v", name, err)
		}
		if err := f.Close(); err != nil {
			t.Fatal(err)
		}
	}
}

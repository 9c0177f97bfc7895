package main

import (
	"bytes"
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestReadmeCommands runs every command of the README that stands behind a "$ lotgate", in
// order, in an empty folder.
func TestReadmeCommands(t *testing.T) {
	text, err := os.ReadFile(filepath.Join("..", "..", "README.md"))
	if err != nil {
		t.Fatal(err)
	}
	t.Chdir(t.TempDir())
	ran := 0
	for _, line := range strings.Split(string(text), "\n") {
		command, ok := strings.CutPrefix(strings.TrimSpace(line), "$ lotgate ")
		if !ok {
			continue
		}
		var out, errs bytes.Buffer
		if status := run(context.Background(), strings.Fields(command), strings.NewReader(""), &out, &errs); status > statusFail {
			t.Errorf("%s gave %d:\n%s%s", command, status, out.String(), errs.String())
		}
		ran++
	}
	if ran < 5 {
		t.Fatalf("only %d commands were found in the README", ran)
	}
	certificates, _ := filepath.Glob("lotgate-demo/store/lots/*/certificates/*.pdf")
	if len(certificates) < 40 {
		t.Errorf("the demo left %d certificates", len(certificates))
	}
}

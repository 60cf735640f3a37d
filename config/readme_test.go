package config

import (
	"fmt"
	"os"
	"strings"
	"testing"
)

// row is a key's line in the README's table.
func row(k Key) string {
	return fmt.Sprintf("| `%s` | %s | %s | %s |", k.Name, k.Allowed(), k.Default, strings.ReplaceAll(k.Hears, "|", `\|`))
}

// TestReadmeTellsEveryKey holds the README's tables to the table that files are read by. A row that
// fails is printed as it should stand.
func TestReadmeTellsEveryKey(t *testing.T) {
	text, err := os.ReadFile("../README.md")
	if err != nil {
		t.Fatal(err)
	}
	for _, k := range append(PatchKeys(), RigKeys()...) {
		if k.Form == Table || k.Form == Array {
			continue
		}
		if !strings.Contains(string(text), row(k)+"\n") {
			t.Errorf("README.md lacks this row:\n%s", row(k))
		}
	}
}

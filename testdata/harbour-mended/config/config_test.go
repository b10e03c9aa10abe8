package config

import (
	"path/filepath"
	"testing"
)

func TestSaveLoad(t *testing.T) {
	path := filepath.Join(t.TempDir(), "harbour.conf")
	if err := Save(path, &Config{Slots: 4, Depth: 50, Hands: 2, Port: "south"}); err != nil {
		t.Fatal(err)
	}
	for _, p := range []string{path, filepath.Dir(path)} {
		c, err := Load(p)
		if err != nil || *c != (Config{4, 50, 2, "south"}) {
			t.Errorf("%s: got %v, %v", p, c, err)
		}
	}
}

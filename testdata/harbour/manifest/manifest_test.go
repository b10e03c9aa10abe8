package manifest

import (
	"os"
	"path/filepath"
	"testing"
)

func TestWriteReadMerge(t *testing.T) {
	dir := t.TempDir()
	path, err := Write(dir, &Manifest{"Alma", []Item{{"rope", 2}, {"tar", 3}}})
	if err != nil {
		t.Fatal(err)
	}
	m, err := Read(path)
	if err != nil || m.Ship != "Alma" || m.Tons() != 5 {
		t.Errorf("got %v, %v", m, err)
	}
	if err := Copy(path+".2", path); err != nil {
		t.Fatal(err)
	}
	both, err := Merge("Alma", path, path+".2")
	if err != nil || both.Tons() != 10 {
		t.Errorf("got %v, %v", both, err)
	}
	if _, err := Merge("Alma", path, filepath.Join(dir, "none")); err == nil {
		t.Error("merged a manifest that is not there")
	}
	if n, err := Weigh([]string{path, filepath.Join(dir, "none")}); n != 5 || err != nil {
		t.Errorf("weighed %d, %v", n, err)
	}
	ship, cargo, err := Preview(path, 1)
	if ship != "Alma" || len(cargo) != 1 || err != nil {
		t.Errorf("got %q, %q, %v", ship, cargo, err)
	}
	out := filepath.Join(dir, "all.json")
	if err := Export(out, []*Manifest{m}); err != nil {
		t.Fatal(err)
	}
	if info, err := os.Stat(out); err != nil || info.Size() == 0 {
		t.Errorf("nothing was exported: %v", err)
	}
}

package judge

import "testing"

func TestShapeOf(t *testing.T) {
	for _, c := range [][]string{
		{"d.mu.Lock()", "desk.mu.Lock()"},
		{"quiet is true", "hush is true"},
		{`fmt.Errorf("a %d", n)`, `fmt.Errorf("b", m)`},
		{"return err", "return problem"},
		{"x[i].mu.Lock()", "y[k].mu.Lock()"},
	} {
		if a, b := shapeOf(c[0]), shapeOf(c[1]); a != b {
			t.Errorf("%s is %s, %s is %s", c[0], a, c[1], b)
		}
	}
	for _, c := range [][]string{
		{"d.mu.Lock()", "d.other.Lock()"},
		{"d.mu.Lock()", "d.mu.Unlock()"},
		{"quiet is true", "quiet is false"},
		{"err != nil is true", "err == nil is true"},
		{"return 0", "return 1"},
		{"return nil", "return err"},
	} {
		if a, b := shapeOf(c[0]), shapeOf(c[1]); a == b {
			t.Errorf("%s and %s are both %s", c[0], c[1], a)
		}
	}
}

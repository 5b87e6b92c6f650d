package layout1

import "testing"

// BenchmarkRender composes and renders one report of six pages.
func BenchmarkRender(b *testing.B) {
	m := accepted(b)
	b.ReportAllocs()
	for b.Loop() {
		render(b, m)
	}
}

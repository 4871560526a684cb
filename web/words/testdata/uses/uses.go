// Package uses shows the test of the sources each way of asking for words.
package uses

type printer interface {
	T(key string, args ...any) string
}

func _(p printer, kind string) {
	p.T("x.whole")
	p.T("x.with", 1, "two")
	p.T("x.part." + kind)
	p.T("x.part" + kind) // loose: the literal has no point at its end
	p.T(kind)            // loose
}

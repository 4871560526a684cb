package desk

import (
	"fmt"
	"net/url"
	"slices"
	"strconv"
	"strings"

	"holdfast/internal/plant"
	"holdfast/internal/spc/watch"
	"holdfast/web/ui"
)

// arguments says which numbers a kind of rule takes, in the order in which they stand
// in an address, and the least window that means something.
type arguments struct {
	k, m, z bool
	least   int
}

var kinds = []watch.Kind{watch.Beyond, watch.KOfM, watch.OneSide, watch.RisingOrFalling, watch.Alternating, watch.Within, watch.Outside}

var takes = map[watch.Kind]arguments{
	watch.Beyond: {z: true}, watch.KOfM: {k: true, m: true, z: true, least: 1}, watch.OneSide: {m: true, least: 2},
	watch.RisingOrFalling: {m: true, least: 2}, watch.Alternating: {m: true, least: 3},
	watch.Within: {m: true, z: true, least: 2}, watch.Outside: {m: true, z: true, least: 2},
}

// ruleCode is a rule as an address has it: "k-of-m:2:3:2".
func ruleCode(r watch.Rule) string {
	a, parts := takes[r.Kind], []string{string(r.Kind)}
	if a.k {
		parts = append(parts, strconv.Itoa(r.K))
	}
	if a.m {
		parts = append(parts, strconv.Itoa(r.M))
	}
	if a.z {
		parts = append(parts, strconv.FormatFloat(r.Z, 'g', -1, 64))
	}
	return strings.Join(parts, ":")
}

// readRule reads what ruleCode wrote.
func readRule(code string) (watch.Rule, bool) {
	parts := strings.Split(code, ":")
	r := watch.Rule{Kind: watch.Kind(parts[0])}
	a, known := takes[r.Kind]
	if !known {
		return r, false
	}
	parts = parts[1:]
	next := func() string {
		if len(parts) == 0 {
			return ""
		}
		p := parts[0]
		parts = parts[1:]
		return p
	}
	var err error
	bad := false
	if a.k {
		r.K, err = strconv.Atoi(next())
		bad = bad || err != nil
	}
	if a.m {
		r.M, err = strconv.Atoi(next())
		bad = bad || err != nil
	}
	if a.z {
		r.Z, err = strconv.ParseFloat(next(), 64)
		bad = bad || err != nil
	}
	return r, !bad && len(parts) == 0 && r.Validate() == nil
}

// readRules reads the rules of one panel; what cannot be read is left away, since only
// a damaged address holds such.
func readRules(codes []string) []watch.Rule {
	var out []watch.Rule
	for _, c := range codes {
		if r, ok := readRule(c); ok && !slices.Contains(out, r) && len(out) < watch.MaxRules {
			out = append(out, r)
		}
	}
	return out
}

// newRule reads a rule that is typed into the form; problems go to their fields.
func newRule(f ui.Format, q url.Values, problems map[string]string) (watch.Rule, bool) {
	w := f.Words
	r := watch.Rule{Kind: watch.Kind(q.Get("kind"))}
	a, known := takes[r.Kind]
	if !known {
		problems["kind"] = w.T("desk.rule.bad-kind")
		return r, false
	}
	ok := true
	whole := func(field string, least, most int) int {
		n, err := strconv.Atoi(strings.TrimSpace(q.Get(field)))
		if err != nil || n < least || n > most {
			problems[field], ok = w.T("desk.rule.bad-whole", least, most), false
		}
		return n
	}
	if a.m {
		r.M = whole("m", a.least, watch.MaxWindow)
	}
	if a.k {
		most := r.M
		if most < 1 || most > watch.MaxWindow {
			most = watch.MaxWindow
		}
		r.K = whole("k", 1, most)
	}
	if a.z {
		z, err := plant.ParseDecimal(q.Get("z"))
		if err != nil || z.Units <= 0 || z.Float() > 10 {
			problems["z"], ok = w.T("desk.rule.bad-z"), false
		}
		r.Z = z.Float()
	}
	return r, ok
}

// ruleChoice is one rule that can be ticked.
type ruleChoice struct {
	ID, Code, Words string
	On              bool
}

// ruleChoices are the rules of the named sets and of the chart's defaults, with what
// is on beyond them.
func ruleChoices(f ui.Format, name string, on, defaults []watch.Rule) []ruleChoice {
	all := slices.Clone(watch.WesternElectric())
	for _, list := range [][]watch.Rule{watch.Nelson(), defaults, on} {
		for _, r := range list {
			if !slices.Contains(all, r) {
				all = append(all, r)
			}
		}
	}
	out := make([]ruleChoice, len(all))
	for i, r := range all {
		out[i] = ruleChoice{ID: fmt.Sprintf("%s-%d", name, i), Code: ruleCode(r), Words: upperFirst(f.Words.Rule(r, plant.Neither)), On: slices.Contains(on, r)}
	}
	return out
}

// sameRules reports whether two sets hold the same rules, in any order.
func sameRules(a, b []watch.Rule) bool {
	if len(a) != len(b) {
		return false
	}
	for _, r := range a {
		if !slices.Contains(b, r) {
			return false
		}
	}
	return true
}

// setName names a known set, "" for a set of one's own.
func setName(f ui.Format, rules []watch.Rule) string {
	switch {
	case sameRules(rules, watch.WesternElectric()):
		return f.Words.T("desk.set.western-electric")
	case sameRules(rules, watch.Nelson()):
		return f.Words.T("desk.set.nelson")
	}
	return ""
}

// rulesInWords says the rules of a panel.
func rulesInWords(f ui.Format, rules []watch.Rule) string {
	if len(rules) == 0 {
		return f.Words.T("desk.rules.none")
	}
	said := make([]string, len(rules))
	for i, r := range rules {
		said[i] = f.Words.Rule(r, plant.Neither)
	}
	return upperFirst(strings.Join(said, "; "))
}

func keysOf(rules []watch.Rule) []string {
	out := make([]string, len(rules))
	for i, r := range rules {
		out[i] = plant.RuleKey(r)
	}
	return out
}

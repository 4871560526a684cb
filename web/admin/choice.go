package admin

import (
	"net/http"
	"net/url"
	"slices"
	"strconv"

	"holdfast/internal/spc/guide"
	"holdfast/web/ui"
)

// choiceView is the guided choice of a chart: a few plain questions, and what follows
// from the answers.
type choiceView struct {
	Asked  []field
	Answer *choiceAnswer
}

// choiceAnswer is the chart that is recommended, and why. Where the best one cannot be
// used here yet, it says so and names the nearest that can.
type choiceAnswer struct {
	Chart, Why string
	Instead    string // what the best chart would be, when it is another
	Use        string // where a characteristic with this chart is begun
}

func (a *Admin) showChoice(w http.ResponseWriter, r *http.Request) error {
	q := newAsking(ui.FrameOf(r).Words, r.URL.Query())
	t := q.w
	answered := q.get("size") != ""
	if !answered {
		q.values = url.Values{"batches": {string(guide.Pieces)}, "varies": {"no"}, "special": {"none"}}
	}
	var v choiceView
	if answered {
		v.Answer = recommended(q)
	}
	yesNo := []option{{Value: "no", Text: t.T("setup.choice.varies-no")}, {Value: "yes", Text: t.T("setup.choice.varies-yes")}}
	v.Asked = []field{
		q.field(radio, "batches").among([]option{
			{Value: string(guide.Pieces), Text: t.T("setup.choice.pieces"), Hint: t.T("setup.choice.pieces-hint")},
			{Value: string(guide.Uniform), Text: t.T("setup.choice.uniform"), Hint: t.T("setup.choice.uniform-hint")},
		}),
		q.field(whole, "size"),
		q.field(radio, "varies").among(yesNo),
		q.field(radio, "special").among([]option{
			{Value: "none", Text: t.T("setup.choice.special-none")},
			{Value: "streams", Text: t.T("setup.choice.special-streams")},
			{Value: "wear", Text: t.T("setup.choice.special-wear")},
		}),
	}
	status := http.StatusOK
	if !q.ok() {
		status = http.StatusUnprocessableEntity
	}
	return ui.Render(w, r, status, choicePage(shellFor(r, t.T("setup.choice.title")), v))
}

// recommended asks the guide, twice where its first answer is a chart that cannot be used
// here from the station to the desk.
func recommended(q *asking) *choiceAnswer {
	size := q.wholeOf("size", 25)
	if size == 0 && q.ok() {
		q.refuse("size", q.w.T("setup.problem.whole", 25))
	}
	if !q.ok() {
		return nil
	}
	c := guide.Case{Measured: guide.Readings, SubgroupSize: size, Batches: guide.Batches(q.get("batches")), SizeVaries: q.get("varies") == "yes"}
	full := c
	switch q.get("special") {
	case "streams":
		full.Streams = 2
	case "wear":
		full.Wear = true
	}
	best, err := guide.Choose(full)
	if err != nil {
		q.refuse("size", q.w.T("setup.problem.choose"))
		return nil
	}
	answer := &choiceAnswer{}
	advice := best
	if !slices.Contains(charts, best.Chart) {
		if advice, err = guide.Choose(c); err != nil || !slices.Contains(charts, advice.Chart) {
			q.refuse("size", q.w.T("setup.problem.choose"))
			return nil
		}
		answer.Instead = q.w.T("setup.choice.instead." + q.get("special"))
	}
	if advice.Chart == charts[2] {
		size = 1 // a chart of single readings has one part a time
	}
	answer.Chart, answer.Why = chartWord(q.w, advice.Chart), advice.Why
	answer.Use = measureNew + "?" + url.Values{"chart": {string(advice.Chart)}, "size": {strconv.Itoa(size)}}.Encode()
	return answer
}

package ui

import (
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/words"
)

// Topics of the live hub. A page names what it shows, the hub's renderer renders by
// these names, and /live asks TopicAction who may watch.
const (
	TopicBoard = "board"
	TopicCalls = "calls" // on every page of who is called about what nobody takes
)

const (
	stationTopics = "station/"
	chartTopics   = "chart/"
)

// TopicStation is the topic of one station's page.
func TopicStation(id uuid.UUID) string { return stationTopics + id.String() }

// TopicChart is the topic of one characteristic's chart at the desk.
func TopicChart(id uuid.UUID) string { return chartTopics + id.String() }

// StationOfTopic returns the station of a station's topic.
func StationOfTopic(topic string) (uuid.UUID, bool) { return idAfter(topic, stationTopics) }

// ChartOfTopic returns the characteristic of a chart's topic.
func ChartOfTopic(topic string) (uuid.UUID, bool) { return idAfter(topic, chartTopics) }

func idAfter(topic, prefix string) (uuid.UUID, bool) {
	text, ok := strings.CutPrefix(topic, prefix)
	if !ok {
		return uuid.Nil, false
	}
	id, err := uuid.Parse(text)
	return id, err == nil && id.String() == text // one spelling, or the hub would render it twice
}

// topicsIn names topics for a page in one language, so that what is pushed is in the
// language of the page: "station/…@de". English goes without a name.
func topicsIn(w *words.Printer, topics []string) []string {
	if w == words.For("en") {
		return topics
	}
	out := make([]string, len(topics))
	for i, t := range topics {
		out[i] = t + inLanguage + w.Lang()
	}
	return out
}

const inLanguage = "@"

// InEveryLanguage lists a topic of a surface in each language that the surface speaks.
// All of them change together; the hub renders those that somebody watches.
func InEveryLanguage(s Surface, topic string) []string {
	out := []string{topic}
	for _, lang := range words.Languages() {
		if w, _ := words.Known(lang); w != words.For("en") && w.On(string(s)) == w {
			out = append(out, topic+inLanguage+lang)
		}
	}
	return out
}

// TopicLanguage splits a topic into what it shows and the words that it is shown in.
// It is false for a language that there is not, that the surface does not speak, or
// that is spelt otherwise than topicsIn does: the hub would render it for nobody.
func TopicLanguage(topic string) (string, *words.Printer, bool) {
	base, lang, named := strings.Cut(topic, inLanguage)
	english := words.For("en")
	if !named {
		return topic, english, true
	}
	w, known := words.Known(lang)
	return base, w, known && w != english && w.On(string(surfaceOfTopic(base))) == w
}

func surfaceOfTopic(base string) Surface {
	switch {
	case strings.HasPrefix(base, stationTopics), base == TopicCalls: // which speaks as the page that it stands on
		return Station
	case strings.HasPrefix(base, chartTopics):
		return Desk
	}
	return Board
}

// TopicAction is what somebody must be allowed to do to watch a topic: the same as
// for the page that shows it. It is false for what is no topic.
func TopicAction(topic string) (plant.Action, bool) {
	topic, _, ok := TopicLanguage(topic)
	if !ok {
		return 0, false
	}
	switch topic {
	case TopicBoard:
		return plant.SeeBoard, true
	case TopicCalls:
		return plant.AnswerCalls, true
	}
	if _, ok := StationOfTopic(topic); ok {
		return plant.TakeRounds, true
	}
	if _, ok := ChartOfTopic(topic); ok {
		return plant.SeeDesk, true
	}
	return 0, false
}

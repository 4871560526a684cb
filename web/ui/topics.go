package ui

import (
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// Topics of the live hub. A page names what it shows, the hub's renderer renders by
// these names, and /live asks TopicAction who may watch.
const TopicBoard = "board"

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

// TopicAction is what somebody must be allowed to do to watch a topic: the same as
// for the page that shows it. It is false for what is no topic.
func TopicAction(topic string) (plant.Action, bool) {
	if topic == TopicBoard {
		return plant.SeeBoard, true
	}
	if _, ok := StationOfTopic(topic); ok {
		return plant.TakeRounds, true
	}
	if _, ok := ChartOfTopic(topic); ok {
		return plant.SeeDesk, true
	}
	return 0, false
}

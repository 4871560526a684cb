package main

import (
	"errors"
	"fmt"
	"io"
	"os"

	"holdfast/internal/calc"
)

// calcCmd answers one question of the statistics from standard input.
type calcCmd struct {
	Topic   string `arg:"" optional:"" help:"What is asked; leave it out for a list."`
	Example bool   `help:"Print an input that works instead of reading one."`
}

func (c *calcCmd) Run() error {
	if !c.answer(os.Stdin, os.Stdout, os.Stderr) {
		os.Exit(2)
	}
	return nil
}

// answer writes one JSON object, or one line about what is wrong and nothing else. It
// reports whether there was an answer.
func (c *calcCmd) answer(in io.Reader, out, problems io.Writer) bool {
	text, err := c.text(in)
	if err != nil {
		fmt.Fprintln(problems, err)
		return false
	}
	_, err = fmt.Fprintln(out, text)
	return err == nil
}

func (c *calcCmd) text(in io.Reader) (string, error) {
	if c.Topic == "" {
		if c.Example {
			return "", errors.New("name the topic of which to print an example")
		}
		return listTopics(), nil
	}
	topic, err := calc.Find(c.Topic)
	if err != nil {
		return "", err
	}
	if c.Example {
		return topic.Example, nil
	}
	// One byte more than is taken tells that there is more.
	input, err := io.ReadAll(io.LimitReader(in, calc.MaxBytes+1))
	if err != nil {
		return "", fmt.Errorf("read the input: %w", err)
	}
	answer, err := topic.Run(input)
	return string(answer), err
}

func listTopics() string {
	text := "One JSON object in on standard input, one out. Topics:\n"
	for _, t := range calc.Topics() {
		text += fmt.Sprintf("\n  %-18s %s", t.Name, t.Line)
	}
	return text + "\n\nholdfast calc TOPIC --example prints an input that works."
}

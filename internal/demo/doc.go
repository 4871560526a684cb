// Package demo is Kestrel Row, an invented works that makes bicycle hubs: its lines,
// machines and characteristics, sixty days of history with known special causes, and a
// simulator that goes on live. All of it is made up from a fixed seed.
//
// History and simulator write through the same store operations as everybody else;
// only the clock of the history is not the real one. What went wrong, when and why is
// known here (fault), so that a visitor can see what the charts made of it.
package demo

// Package station is the operator's surface: a page for a tablet that says what is
// due, takes the readings one question at a time and tells the verdict; and the few
// other things a person does there, which are taking and closing what is open,
// recording a change, correcting the last round and saying what a machine does.
//
// It decides no statistics: verdicts come from the store, limits from the revision,
// suspicions of a slip from internal/spc/slip. It knows neither the store nor the
// other surfaces. Every form works without a script; static/js/station*.js add the
// keypad, the gauge that types and the drawing that follows.
//
// # A round
//
// The form carries what a repeated send must repeat: the number of the round, made
// when the page was rendered, what it answers, and the set-up that was seen. The
// script adds when it was saved by the tablet's clock and when it was sent; without
// it the server's clock counts, and the first stamp of a number holds for its
// repetitions (stamps).
//
// A reading that a slip may explain is asked for once more. The first typing stays in
// the form, so that the record keeps both; what it might have been is never shown.
// The page carries the interval outside of which the server would ask, in whole
// last digits, so that the script asks for the same readings as the server.
//
// # What is live
//
// Two elements are pushed: the left column, and what stands on the right while
// nothing is being typed. A round that is being typed is never touched.
package station

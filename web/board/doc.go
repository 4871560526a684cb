// Package board is the supervisor's surface: one page, read from eight metres on a
// wall and on a desktop, that says which station needs a person now, for how long,
// and who has it.
//
// The page is made of the parts that the live hub pushes (Fragments), so that what is
// shown at first and what is pushed later are the same HTML:
//
//	board-day, board-clock   day, shift and time in the top bar
//	lanes-order              which stations stand where; no more than a mark
//	card-<station>           a station
//	needs                    who is needed, oldest first
//	shift                    what the foot says of now and this shift
//
// The same parts go to everybody. What a viewer has chosen to see (a line, an owner,
// some of the lanes) stands in attributes of the page's root; static/js/board.js hides
// what does not belong to it after each push, as the server does at first. Stations
// that come or go change lanes-order, and then the script asks for the page again.
//
// Links in the parts lead through addresses of the board itself, which redirect to
// what this person may open: the station for who takes rounds, the chart for who may
// see the desk.
package board

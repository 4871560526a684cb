// Package calls is what the program says to find somebody for something that nobody
// takes: the text of messages, the notice on every page that a supervisor has open, the
// list of what was sent, and the page on which a known matter is kept quiet.
//
// # The body of a webhook
//
// One JSON object in UTF-8, the same bytes at every attempt:
//
//	{
//	  "type": "call.raised",
//	  "timestamp": "2026-03-12T12:21:00Z",      when the step fired
//	  "data": {
//	    "call": "hold",                          "look", "hold" or "round" (promised and not taken)
//	    "step": 3,
//	    "since": "2026-03-12T12:01:00Z",         when it opened, or when the round was due
//	    "minutes": 20,                           from then to the step
//	    "title": "Hold at Press, ...",           one line for people, in the plant's language
//	    "why": "outside specification, ...",     what stands, for people
//	    "plant": {"id": "...", "name": "..."},
//	    "line": {"id": "...", "name": "..."},
//	    "station": {"id": "...", "name": "..."},
//	    "characteristic": {"id": "...", "name": "..."},
//	    "matter": "...",                         id; absent for a round
//	    "overdue_round": "...",                  id; absent for a matter
//	    "address": "https://..."                 absent where the server does not know its own
//	  }
//	}
//
// Fields may be added; none is renamed or removed. It names no person. A test message has
// the type "call.test" and of data only title and why.
package calls

// Package api serves /api/v1: the way in for gauges, machines and programs of the
// plant. A sender is a device that an administrator let in; it proves itself by the
// token that it was told then, and nothing else lets it in: no session, no cookie.
//
//	GET  /api/v1               the description of all this, for who writes a sender
//	GET  /api/v1/station       what the sender's station measures now
//	POST /api/v1/rounds        a round, as a tablet would send it
//	POST /api/v1/machines/{id} that a machine runs or stands still, what it makes, its counter
//	POST /api/v1/lines         a line that a sender could not read
//
// Everything is sent under a number of the sender's own (a UUIDv7), so sending again is
// always safe: a round that is on record gets the answer that it got the first time.
// What cannot be taken is never guessed at. It is refused with a field and a sentence,
// kept as it came, and shown at the station until a person has seen it. The examples
// stand in guide.md, which is what GET /api/v1 answers.
package api

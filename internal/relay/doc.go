// Package relay brings readings from gauges and from the plant's broker to the server.
//
// There is one way: what comes is written to a Spool, a file on the sender's host, before
// anything else is done with it; a Poster sends what waits there, in order, under the
// number that it got when it came, until the server has taken or refused it. So a
// restart, a broken connection and a lost answer lose nothing and send nothing twice: the
// server knows a number again. What is no reading is never guessed at: it goes to the
// server as a bad line, which the station shows.
//
// What the server will never take (it cannot be, it is too large, there is no such station)
// is put aside in a file of its own for a person, the station is told of what the server did
// not keep itself, and what comes after it goes on. A token that is worth nothing, a server
// that is busy, broken or out of reach: all is kept and sent again, ever more seldom up to
// once a minute, and the log says why. One message that is not taken now lets the rest go on.
//
// When the disk is full, what comes is held in memory (at most MostHeld) and sent from
// there; the log says so, and what was already on the disk stays. From a broker nothing
// is acknowledged that is not on the disk: the broker keeps it meanwhile.
package relay

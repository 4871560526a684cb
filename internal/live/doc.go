// Package live pushes the current state of pages to the browsers that show
// them. It knows topics, fragments and sockets; it knows no SQL, no HTML and no
// rights. The caller decides who may watch what before it calls Serve, renders
// the fragments, and says which topics changed.
//
// # How a change travels
//
// [Hub.Dirty] marks topics and never blocks. At most once every Options.Interval
// the hub asks the [Renderer] for all marked topics that somebody watches, in
// one call, however many watch. Fragments whose bytes did not change are
// dropped; the others of a topic become one message that is encoded once and
// sent to all who watch it. Topics with watchers are also rendered every
// Options.RefreshEvery, because ages and due times change with the clock.
//
// There is no replay. A client that connects gets all fragments of its topics
// first, rendered after it joined. A client that is slower than the changes
// keeps at most one waiting state a fragment, the newest; when its socket takes
// nothing for Options.WriteTimeout it is cut off and, like after any
// reconnect, starts from a full state again. So cost follows changes, not
// viewers times events, and memory a client is bounded by its page.
//
// When the renderer fails, its topics stay marked and are tried again with a
// growing pause; the watchers are told that what they see is stale, since a
// heartbeat alone would let an old state look alive. A failed call for several
// topics is repeated topic by topic, so that one that cannot be rendered does
// not stop the others.
//
// # Messages to the browser
//
// Each message is one JSON text frame:
//
//	{"type":"hello","epoch":"6f1c…","beat":5000}
//	{"type":"state","topic":"board","full":true,"fragments":[{"id":"lane-2","v":17,"html":"<section id=…"}]}
//	{"type":"stale","topic":"board"}
//	{"type":"beat"}
//
// hello comes first. beat in it is the number of milliseconds between two beat
// messages: browsers do not show pings to scripts, so silence for a few times
// that long means that the link is dead even though no close event came.
// Versions (v) grow over the life of one hub, whose random name is the epoch: a
// client ignores a fragment that is not newer than the one it has, and forgets
// all versions when the epoch changes, as it does when another server answers.
//
// A fragment replaces the element with its id; the html is that element, whole.
// Ids are unique in a page, so also across the topics of one socket. A fragment
// that is no longer rendered is forgotten, not removed from pages: things that
// come and go belong inside a fragment that stays. full marks a complete state
// of the topic. A state message ends a stale topic, even with no fragments.
//
// Clients send nothing but pongs and close frames; what else they send is read
// up to a small limit and ignored.
//
// # Ends
//
// The close code says why ([Reason]): 4401 the session ended (go to the sign-in
// page), 4403 not allowed (do not try again), 4408 too slow, 4429 too many
// sockets, 1001 the server stops (come back, with a random pause). A client
// that is cut off for being slow rarely gets to read the code: its link is full.
// The reason then stands in the log and in [Stats].
//
// A session that ends on this server ends its sockets by [Hub.Drop]. One that
// ends elsewhere is found by Options.Recheck, which is asked every few seconds
// about all sessions with sockets in one call. When that call fails nobody is
// dropped; the next one asks again.
package live

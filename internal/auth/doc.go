// Package auth decides who is asking: it checks secrets, keeps sessions and slows
// down guessing. It knows plant's people and no pages, and has no SQL of its own:
// where credentials, people and sessions are kept is handed in.
//
//   - [Secret] is what a person types. It hides itself from logs and JSON.
//   - [Rules] say which secrets may be chosen.
//   - [Hasher] turns secrets into strings to store, and checks them.
//   - [Throttle] makes guessing slow without locking anybody out.
//   - [Door] joins these: a login, a secret and an address in, a person out.
//   - [Sessions] remembers who has come in, from request to request.
//
// What a person may do is decided by plant.Person.May, not here.
package auth

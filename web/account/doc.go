// Package account is everybody's own page: what they may be, in which language pages speak
// to them, where they are signed in, and the way to another password or PIN of one's own.
// It hangs on the name in the top bar of every surface.
//
// Nobody changes anything here on the strength of an open session alone: a tablet that was
// left open must not be enough to take somebody's place for good. What is asked for is what
// the session was begun with. Whoever came by name and password types the password, for a
// new PIN too; who came by badge and PIN, on an enrolled tablet, types the PIN, since many
// at the line know no other. So a PIN opens no password, and where a PIN counts for nothing
// it cannot be tried either. Both are checked by internal/auth with the very counts of the
// sign-in page: a try here is a try there, with the same growing pauses, and this page is no
// second place to guess at.
//
// A change ends all other sessions of the person; this one goes on under a new token. It is
// entered in the plant's chain like the same act by an administrator, by whom it was done
// included. The language is a preference and no fact.
package account

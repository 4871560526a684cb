// Package certs gives the server its TLS certificate: from a small authority of the
// plant's own that it keeps in a folder, or from files that somebody else renews.
//
// The authority exists because names and addresses inside a plant are seldom public, and
// without a trusted certificate tablets lose their offline queue: browsers offer service
// workers and secure randomness on trustworthy pages only. Its certificate is installed
// once on every tablet. It is held to the names of the server and to private addresses
// (RFC 5280, name constraints), so that whoever steals its key from the box cannot stand
// in for other sites before those tablets.
//
// The package decides lifetimes, names and renewal. It does not know HTTP handlers, and it
// reads no clock of its own.
package certs

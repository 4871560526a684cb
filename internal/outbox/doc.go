// Package outbox takes messages to where they are to go: webhooks and mail. What is to be
// sent waits in a store; the package claims it, tries, and notes what came of it. It
// decides when to try again and when to give up, and it refuses to connect to anything
// that its configuration does not allow. It knows no SQL and no pages, and nothing of
// what the messages are about.
//
// # Delivery
//
// A message is delivered at least once. Its id stays the same over all attempts, so that
// a receiver can tell a repetition: in the header webhook-id, and as the Message-ID of a
// mail. A server that dies over an attempt loses its claim after the lease, and another
// tries. A target that fails is left alone for a while that doubles with each failure in
// a row, with half of it random, up to a cap; whatever waits for it waits with it. A
// refusal that will not change (HTTP 4xx, SMTP 5xx) gives the message up after a few
// attempts, everything else when its time is over.
//
// # Webhooks
//
// The signature follows the Standard Webhooks specification, version 1.0.0
// (https://www.standardwebhooks.com): the headers webhook-id, webhook-timestamp and
// webhook-signature, the last one "v1," and the Base64 of HMAC-SHA256 over
// "ID.TIMESTAMP.BODY". While a secret is being replaced, a secret of two lines makes two
// signatures. A receiver should refuse timestamps that are more than five minutes off.
// Any answer from 200 to 299 is success. Redirects are not followed, and of the answer's
// body a few kilobytes are read and thrown away.
//
// # What may be reached
//
// A host must be named in the configuration. Its addresses are resolved once, every one
// of them is checked, and the connection is made to a checked address: what the name
// resolves to a moment later does not matter. Addresses that are not public (private,
// loopback, link-local and the like, also when they are wrapped into IPv6) must lie in a
// network that the configuration lists. No proxy of the environment is used.
//
// # Secrets
//
// The configuration names secrets and never holds one. They come from a folder, from the
// service manager ($CREDENTIALS_DIRECTORY) or from the environment, and print as a
// placeholder wherever they are printed.
package outbox

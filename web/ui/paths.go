package ui

import (
	"net/http"
	"net/url"
	"strings"
)

// Addresses that more than one package names.
const (
	SignInAddress    = "/sign-in"
	SignOutAddress   = "/sign-out"
	StillHereAddress = "/still-here" // tells that somebody is at work on a page that sends nothing else
	ThemeAddress     = "/theme"
	LanguageAddress  = "/language"
	CallsAddress     = "/calls" // what nobody has taken, and who was told
	AccountAddress   = "/account"
)

// maxPath is the longest path that is gone back to, in bytes.
const maxPath = 2000

// SignInPath is the sign-in page that leads back to a local path.
func SignInPath(back string) string {
	if back = LocalPath(back); back == "/" {
		return SignInAddress
	}
	return SignInAddress + "?" + url.Values{"to": {back}}.Encode()
}

// AccountPath is everybody's own page, with the way back to a local path.
func AccountPath(back string) string {
	if back = LocalPath(back); back == "/" {
		return AccountAddress
	}
	return AccountAddress + "?" + url.Values{"to": {back}}.Encode()
}

// LocalPath returns path when it is a path of this server, with its query, and "/"
// for everything else: another host in any of the spellings that browsers accept,
// another scheme, control characters.
func LocalPath(path string) string {
	if !strings.HasPrefix(path, "/") || strings.HasPrefix(path, "//") {
		return "/"
	}
	for _, c := range []byte(path) {
		if c < ' ' || c == 0x7f || c == '\\' {
			return "/"
		}
	}
	u, err := url.Parse(path)
	if err != nil || u.Scheme != "" || u.Host != "" || u.User != nil || strings.HasPrefix(u.Path, "//") {
		return "/"
	}
	// A browser resolves dot segments before it looks for a host, so "/.//x" must
	// not stay either.
	for _, part := range strings.Split(u.Path, "/") {
		if part == "." || part == ".." {
			return "/"
		}
	}
	local := (&url.URL{Path: u.Path, RawPath: u.RawPath, RawQuery: u.RawQuery}).String()
	if len(local) > maxPath { // escaping makes it longer
		return "/"
	}
	return local
}

// refererPath is the page that a form was sent from, "/" when it is not known or
// not ours.
func refererPath(r *http.Request) string {
	u, err := url.Parse(r.Referer())
	if err != nil || u.Host == "" || u.Host != r.Host {
		return "/"
	}
	return LocalPath(u.RequestURI())
}

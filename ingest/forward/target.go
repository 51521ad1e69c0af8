package forward

import (
	"errors"
	"fmt"
	"net"
	"net/url"
	"strings"
)

// Target is where and as whom to write.
type Target struct {
	// URL is the write address whole, with precision=ns.
	URL *url.URL
	// auth is the value of the Authorization header, "" for none.
	auth string
	// plain allows a token over plain http to anywhere.
	plain bool
}

// Renew takes another token, by the rules of ParseTarget; what it refuses
// leaves the old one. Not safe while a Forwarder of another goroutine sends.
func (t *Target) Renew(token string) error {
	auth, err := Authorization(t.URL, token, t.plain)
	if err == nil {
		t.auth = auth
	}
	return err
}

// ParseTarget reads a write address, such as http://host:8086/write?db=lab or
// https://host/api/v2/write?org=lab&bucket=sag. token may be empty; at a
// version 1 address it may be "user:password". A token is refused over plain
// http to a host outside private networks, unless plain allows it.
func ParseTarget(address, token string, plain bool) (*Target, error) {
	u, err := url.Parse(address)
	if err != nil || u.Host == "" || u.Scheme != "http" && u.Scheme != "https" {
		return nil, errors.New("the address is no http or https URL")
	}
	if err := ShowsNothing(u); err != nil {
		return nil, err
	}
	q := u.Query()
	v2 := strings.HasSuffix(u.Path, "/api/v2/write")
	switch {
	case v2 && !q.Has("bucket"):
		return nil, errors.New("a version 2 address names its bucket: /api/v2/write?org=ORG&bucket=BUCKET")
	case !v2 && !strings.HasSuffix(u.Path, "/write"):
		return nil, fmt.Errorf("path %q is none to write to: /write?db=NAME or /api/v2/write?org=ORG&bucket=BUCKET", u.Path)
	}
	q.Set("precision", "ns")
	u.RawQuery = q.Encode()
	t := &Target{URL: u, plain: plain}
	return t, t.Renew(token)
}

// ShowsNothing refuses an address with a user, a password or a token in it,
// which whatever prints the address would show.
func ShowsNothing(u *url.URL) error {
	if u.User != nil {
		return errors.New("the address holds a user or password, which logs would show: put user:password into a token file")
	}
	q := u.Query()
	for _, key := range []string{"p", "u", "token"} {
		if q.Has(key) {
			return fmt.Errorf("the address holds %s=, which logs would show: put it into a token file", key)
		}
	}
	return nil
}

// Authorization is the value of the header of that name for a token at an
// address, "" for no token: Token at a version 2 address, Basic for
// user:password, else Bearer. A token is refused over plain http to a host
// outside private networks, unless plain allows it.
func Authorization(u *url.URL, token string, plain bool) (string, error) {
	switch token = strings.TrimSpace(token); {
	case token == "":
		return "", nil
	case strings.ContainsAny(token, "\r\n"):
		return "", errors.New("the token has more than one line")
	case u.Scheme == "http" && !plain && !private(u.Hostname()):
		return "", errors.New("a token would go over plain http to a host outside private networks: use https")
	case strings.HasSuffix(u.Path, "/api/v2/write"):
		return "Token " + token, nil
	case strings.Contains(token, ":"):
		return "Basic " + basic(token), nil
	}
	return "Bearer " + token, nil
}

// private tells whether a host is this machine or on a private network by its
// very name.
func private(host string) bool {
	if host == "localhost" || !strings.Contains(host, ".") && !strings.Contains(host, ":") ||
		strings.HasSuffix(host, ".local") || strings.HasSuffix(host, ".internal") {
		return true
	}
	ip := net.ParseIP(host)
	return ip != nil && (ip.IsLoopback() || ip.IsPrivate() || ip.IsLinkLocalUnicast())
}

// String is the address without the token: fit to be shown.
func (t *Target) String() string { return t.URL.Redacted() }

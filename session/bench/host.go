package bench

import (
	"fmt"
	"net"
	"net/http"
	"slices"
	"strings"

	"tenthmark/session"
)

// checkHost: without encryption the page is for this computer alone, so a call that
// comes by another name was led here: by a name server that answers with a loopback
// address it makes somebody else's page look like ours.
func (b *Bench) checkHost(r *http.Request) error {
	if b.TLS {
		return nil
	}
	host := r.Host
	if h, _, err := net.SplitHostPort(host); err == nil {
		host = h
	}
	ip := net.ParseIP(strings.Trim(host, "[]"))
	if host == "localhost" || ip != nil && ip.IsLoopback() || slices.Contains(b.Hosts, host) {
		return nil
	}
	return session.Refuse("other-host", fmt.Sprintf("This page is not served under the name %q.", host), "Open it with the address that the daemon printed when it started.")
}

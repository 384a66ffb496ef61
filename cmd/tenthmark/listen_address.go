package main

import (
	"fmt"
	"net"
)

// isLoopback says whether an address can be reached from this computer alone.
func isLoopback(listen string) (bool, error) {
	host, _, err := net.SplitHostPort(listen)
	if err != nil {
		return false, fmt.Errorf("listen = %q is no HOST:PORT", listen)
	}
	if host == "localhost" {
		return true, nil
	}
	ip := net.ParseIP(host)
	return ip != nil && ip.IsLoopback(), nil
}

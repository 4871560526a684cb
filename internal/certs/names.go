package certs

import (
	"fmt"
	"net"
	"os"
	"strings"
)

// MachineNames lists under which names this machine may be reached in its network: its
// host name, the same under .local (multicast DNS, RFC 6762), localhost, and the addresses
// of its interfaces. Link-local addresses are left out: nobody types them.
func MachineNames() ([]string, error) {
	out := []string{"localhost", "127.0.0.1", "::1"}
	if host, err := os.Hostname(); err == nil && host != "" && host != "localhost" {
		out = append(out, host)
		if net.ParseIP(host) == nil && !strings.Contains(host, ".") {
			out = append(out, host+".local")
		}
	}
	addrs, err := net.InterfaceAddrs()
	if err != nil {
		return nil, fmt.Errorf("list the machine's addresses: %w", err)
	}
	for _, a := range addrs {
		if n, ok := a.(*net.IPNet); ok && n.IP.IsPrivate() {
			out = append(out, n.IP.String())
		}
	}
	return clean(out), nil
}

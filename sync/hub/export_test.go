package hub

import "crypto/tls"

// TLS returns the TLS settings for an address.
func TLS(a Address) *tls.Config { return a.tls() }

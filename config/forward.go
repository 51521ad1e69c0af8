package config

import (
	"net/url"
	"path/filepath"
)

// Forward says where a run is sent while it is recorded.
type Forward struct {
	// To is the write address of a line-protocol server, whole, such as
	// http://host:8086/write?db=lab; empty: nowhere.
	To string `mapstructure:"to"`
	// TokenFile is an absolute path of a file with the token, or user:password;
	// empty: none.
	TokenFile string `mapstructure:"token_file"`
	// Plain allows a token over plain http to a host outside private networks.
	Plain bool `mapstructure:"plain"`
}

// forward checks what can be seen without the server; the address is read in
// full by who sends.
func (c *checker) forward() {
	f := c.rig.Forward
	if f.To == "" {
		if c.rig.states("forward.token_file") || c.rig.states("forward.plain") {
			c.fail("forward", "forward names no server", "write to: 'http://host:8086/write?db=lab', or leave forward out")
		}
		return
	}
	u, err := url.Parse(f.To)
	switch {
	case err != nil || u.Host == "" || u.Scheme != "http" && u.Scheme != "https":
		c.fail("forward.to", quoted(f.To)+" is no web address", "write the address whole, such as 'http://host:8086/write?db=lab'")
	case u.User != nil || u.Query().Has("p") || u.Query().Has("token"):
		c.fail("forward.to", "the address holds a password or token, which would stand in every copy of the rig file", "put user:password or the token into a file and name it in token_file")
	}
	if f.TokenFile != "" && !filepath.IsAbs(f.TokenFile) && f.TokenFile[0] != '/' {
		c.fail("forward.token_file", "token_file must be an absolute path", "write it from / on, such as /etc/gaugelog/server-token")
	}
}

package store

import (
	"context"
	"net/url"
	"strings"

	"go.etcd.io/bbolt"
)

// URL is the address labels carry, https://host; "" when none was given.
func (s *Store) URL() string {
	var u string
	_ = s.view(func(tx *bbolt.Tx) error { // a store being closed has no address
		u = string(tx.Bucket(bktSetting).Get(settingURL))
		return nil
	})
	return u
}

// SetURL keeps the address labels carry. Labels that are printed keep the one they have.
func (s *Store) SetURL(u string) error {
	p, err := url.Parse(strings.TrimSpace(u))
	if err != nil || !strings.EqualFold(p.Scheme, "https") || p.Host == "" || strings.Trim(p.Path, "/") != "" || p.RawQuery != "" || p.Fragment != "" || p.User != nil {
		return &Error{Code: "invalid", Field: "url", Text: "The label address must be https:// and a host name, such as https://tripwell.example. It is printed on every label, so choose a name that stays."}
	}
	clean := "https://" + strings.ToLower(p.Host)
	return s.do(context.Background(), 1, func(g *group) error {
		if string(g.tx.Bucket(bktSetting).Get(settingURL)) == clean {
			return nil
		}
		return g.put(bktSetting, settingURL, []byte(clean))
	})
}

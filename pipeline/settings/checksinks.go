package settings

import (
	"fmt"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"time"
)

// Tellings lists what a person can be told.
func Tellings() []string { return []string{"cases", "brief", "absence", "delivery"} }

func (c *checker) people() {
	var names []string
	for i, x := range c.s.People {
		p := func(k string) string { return at("person", i, k) }
		names = append(names, x.Name)
		if x.Mail != "" && !regexp.MustCompile(`^[^@\s<>",;]+@[^@\s<>",;]+$`).MatchString(x.Mail) {
			c.wrong(p("mail"), fmt.Sprintf("%q", x.Mail), "one mail address")
		}
		for _, t := range x.Tells {
			c.word(p("tells"), t, Tellings()...)
		}
		c.span(p("after"), x.After, 0, 90*24*time.Hour)
		if x.Mail != "" && len(x.Tells) > 0 && c.s.Mail.Host == "" && c.set[p("mail")] {
			c.fault(p("mail"), "a person to write to but no mail relay", "[mail] with host and from", `host = "relay.example.org"`)
		}
	}
	c.named("person", names)
}

func (c *checker) sinks() {
	m := c.s.Mail
	c.word("mail.tls", m.TLS, "starttls", "implicit", "off")
	c.between("mail.port", float64(m.Port), 1, 65535, "")
	c.oneOf("mail.password_file", m.PasswordEnv, m.PasswordFile, "password_env")
	c.envName("mail.password_env", m.PasswordEnv)
	if m.Host != "" && !regexp.MustCompile(`^[^@\s<>",;]+@[^@\s<>",;]+$`).MatchString(m.From) {
		c.wrong("mail.from", fmt.Sprintf("%q", m.From), "the address that mails come from")
	}
	if m.TLS == "off" && m.Host != "" && !loopback(m.Host) {
		c.wrong("mail.tls", `"off"`, "starttls or implicit; only a relay on this machine may be spoken to in clear")
	}
	if (m.PasswordEnv != "" || m.PasswordFile != "") && m.User == "" {
		c.wrong("mail.user", "a password without a user", "the user name at the relay")
	}
	var names []string
	for i, x := range c.s.Webhooks {
		names = append(names, x.Name)
		c.webhook(i, x)
	}
	c.named("webhook", names)
	if l := c.s.Serve.Listen; l != "" {
		i := strings.LastIndex(l, ":")
		if i < 0 {
			c.wrong("serve.listen", fmt.Sprintf("%q", l), "an address with a port, or nothing")
		} else if port, err := strconv.Atoi(l[i+1:]); err != nil || port < 0 || port > 65535 {
			c.wrong("serve.listen", fmt.Sprintf("%q", l), "a port from 0 to 65535 after the colon")
		}
	}
}

func (c *checker) webhook(i int, x Webhook) {
	p := func(k string) string { return at("webhook", i, k) }
	scheme, rest, ok := strings.Cut(x.URL, "://")
	authority, query, _ := strings.Cut(rest, "?")
	host, _, _ := strings.Cut(authority, "/")
	switch {
	case !ok || host == "" || (scheme != "https" && scheme != "http"):
		c.wrong(p("url"), "something that is no URL", "an https URL")
	case strings.Contains(host, "@"):
		c.wrong(p("url"), "a user or password inside the URL", "a URL without them; the receiver checks the signature made with secret_env or secret_file")
	case scheme == "http" && !loopback(hostOnly(host)):
		c.wrong(p("url"), "http to another machine", "https; only a receiver on this machine may be spoken to in clear")
	case slices.ContainsFunc(strings.Split(query, "&"), secretWord):
		c.wrong(p("url"), "a secret inside the URL", "a URL without it; the receiver checks the signature made with secret_env or secret_file")
	}
	c.oneOf(p("secret_file"), x.SecretEnv, x.SecretFile, "secret_env")
	c.envName(p("secret_env"), x.SecretEnv)
	if x.SecretEnv == "" && x.SecretFile == "" {
		c.wrong(p("secret_env"), "nothing", "where the secret that signs messages is: secret_env or secret_file")
	}
}

func hostOnly(h string) string {
	if strings.HasPrefix(h, "[") {
		return strings.Trim(strings.SplitN(h, "]", 2)[0], "[")
	}
	return strings.SplitN(h, ":", 2)[0]
}

func loopback(host string) bool {
	return host == "localhost" || host == "::1" || strings.HasPrefix(host, "127.")
}

func secretWord(s string) bool {
	s = strings.ToLower(s)
	for _, w := range []string{"password", "passwd", "secret", "token", "api_key", "apikey", "database_url", "://"} {
		if strings.Contains(s, w) {
			return true
		}
	}
	return false
}

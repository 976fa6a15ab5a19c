package mail

import (
	"bufio"
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/tls"
	"crypto/x509"
	"crypto/x509/pkix"
	"encoding/base64"
	"encoding/pem"
	"math/big"
	"net"
	"strings"
	"sync"
	"testing"
	"time"
)

// A relay is a small SMTP server on loopback that says what it is told to.
type relay struct {
	listener net.Listener
	cert     tls.Certificate
	pem      []byte
	startTLS bool
	implicit bool
	auth     string            // "user\x00password" wanted; "" none
	say      map[string]string // reply by command, e.g. "RCPT": "550 no such person"
	mute     string            // command after which nothing is said any more

	mu       sync.Mutex
	letters  []string
	envelope []string
	secure   []bool // TLS was on when the letter came
	sessions sync.WaitGroup
}

// certificate makes a self-signed one for 127.0.0.1 and localhost.
func certificate(t *testing.T) (tls.Certificate, []byte) {
	t.Helper()
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	tpl := &x509.Certificate{
		SerialNumber: big.NewInt(1), Subject: pkix.Name{CommonName: "relay"}, NotBefore: time.Now().Add(-time.Hour), NotAfter: time.Now().Add(time.Hour),
		DNSNames: []string{"localhost"}, IPAddresses: []net.IP{net.IPv4(127, 0, 0, 1)}, IsCA: true, BasicConstraintsValid: true,
		KeyUsage: x509.KeyUsageDigitalSignature | x509.KeyUsageCertSign,
	}
	der, err := x509.CreateCertificate(rand.Reader, tpl, tpl, &key.PublicKey, key)
	if err != nil {
		t.Fatal(err)
	}
	return tls.Certificate{Certificate: [][]byte{der}, PrivateKey: key}, pem.EncodeToMemory(&pem.Block{Type: "CERTIFICATE", Bytes: der})
}

func (r *relay) start(t *testing.T) (host string, port int) {
	t.Helper()
	r.cert, r.pem = certificate(t)
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	if r.implicit {
		l = tls.NewListener(l, &tls.Config{Certificates: []tls.Certificate{r.cert}})
	}
	r.listener = l
	r.sessions.Go(func() {
		for {
			c, err := l.Accept()
			if err != nil {
				return
			}
			r.sessions.Go(func() { r.session(c) })
		}
	})
	t.Cleanup(func() {
		_ = l.Close()
		r.sessions.Wait()
	})
	return "127.0.0.1", l.Addr().(*net.TCPAddr).Port
}

func (r *relay) session(c net.Conn) {
	defer func() { _ = c.Close() }()
	_ = c.SetDeadline(time.Now().Add(10 * time.Second))
	in := bufio.NewReader(c)
	secure := r.implicit
	out := func(s string) { _, _ = c.Write([]byte(s + "\r\n")) }
	reply := func(cmd, usual string) bool {
		if s, ok := r.say[cmd]; ok {
			out(s)
			return strings.HasPrefix(s, "2") || strings.HasPrefix(s, "3")
		}
		out(usual)
		return true
	}
	if !reply("GREET", "220 relay ready") {
		return
	}
	var from string
	for {
		line, err := in.ReadString('\n')
		if err != nil {
			return
		}
		line = strings.TrimRight(line, "\r\n")
		cmd := strings.ToUpper(strings.SplitN(line, " ", 2)[0])
		if cmd == r.mute {
			_, _ = in.ReadString('\n') // until the other side gives up
			return
		}
		switch cmd {
		case "EHLO":
			s := "250-relay\r\n"
			if r.startTLS && !secure {
				s += "250-STARTTLS\r\n"
			}
			if r.auth != "" {
				s += "250-AUTH PLAIN\r\n"
			}
			out(s + "250 8BITMIME")
		case "STARTTLS":
			out("220 go on")
			t := tls.Server(c, &tls.Config{Certificates: []tls.Certificate{r.cert}})
			if t.Handshake() != nil {
				return
			}
			c, in, secure = t, bufio.NewReader(t), true
		case "AUTH":
			b, _ := base64.StdEncoding.DecodeString(line[strings.LastIndexByte(line, ' ')+1:])
			if string(b) != "\x00"+r.auth {
				out("535 5.7.8 wrong name or password")
				continue
			}
			out("235 welcome")
		case "MAIL":
			if reply("MAIL", "250 fine") {
				from = line
			}
		case "RCPT":
			if reply("RCPT", "250 fine") {
				r.mu.Lock()
				r.envelope = append(r.envelope, from+" "+line)
				r.mu.Unlock()
			}
		case "DATA":
			if !reply("DATA", "354 go on") {
				continue
			}
			var b strings.Builder
			for {
				s, err := in.ReadString('\n')
				if err != nil {
					return
				}
				if s == ".\r\n" {
					break
				}
				b.WriteString(strings.TrimPrefix(s, "."))
			}
			if reply("END", "250 taken") {
				r.mu.Lock()
				r.letters = append(r.letters, b.String())
				r.secure = append(r.secure, secure)
				r.mu.Unlock()
			}
		case "QUIT":
			out("221 bye")
			return
		default:
			out("250 fine")
		}
	}
}

func (r *relay) got() []string {
	r.mu.Lock()
	defer r.mu.Unlock()
	return append([]string(nil), r.letters...)
}

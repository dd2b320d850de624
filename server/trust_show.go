package server

import (
	"bytes"
	"encoding/base64"
	"encoding/xml"
	"fmt"
	"mime"
	"net"
	"net/http"
	"slices"
	"strings"

	"github.com/google/uuid"
	"github.com/labstack/echo/v4"
)

// trustPage tells how to trust the house's own authority. Over plain http it is the only thing this server answers.
type trustPage struct {
	Frame
	Heading, Lead string
	Plain         bool // came over http, where anybody on the way can change it
	Open          string
	Authority     string // its name
	Fingerprint   []string
	Hosts         string
	Certificate   string
	Profile       string
	Systems       []trustSystem
	Address       string
	Code          *codePicture
}

type trustSystem struct {
	Name  string
	Steps []string
}

// trustSteps is how many sentences the words hold for each system.
var trustSteps = []struct {
	key string
	n   int
}{{"android", 4}, {"ios", 3}, {"windows", 3}, {"macos", 3}, {"linux", 3}}

// trustAt is where the page stands on the face that is asked: over http it is the first page.
func trustAt(c echo.Context) string {
	if c.Request().TLS == nil {
		return "/"
	}
	return "/trust/"
}

func (s *Server) authority() (*Authority, error) {
	a, ok := s.certificates.(*Authority)
	if !ok {
		return nil, refuse(codeNotFound, "", "This server has no authority of its own, so there is nothing to install. Browsers trust its certificate, or are told how by whoever runs it.")
	}
	return a, nil
}

func (s *Server) trustShow(c echo.Context) error {
	a, err := s.authority()
	if err != nil {
		return err
	}
	k := s.ink()
	view := trustPage{
		Frame: s.frame(c, k.say("trust.title"), ""), Heading: k.say("trust.heading"), Lead: k.say("trust.lead"), Plain: c.Request().TLS == nil,
		Open: s.secureAddress(c.Request()), Authority: a.Name(), Hosts: strings.Join(a.Hosts(), ", "), Address: s.trustAddress(c.Request()),
		Certificate: trustAt(c) + certificateName, Profile: trustAt(c) + profileName,
	}
	view.Insecure = "" // said better on this page itself
	pairs := a.Fingerprint()
	for part := range slices.Chunk(strings.Split(pairs, ":"), 8) {
		view.Fingerprint = append(view.Fingerprint, strings.Join(part, ":"))
	}
	for _, sys := range trustSteps {
		steps := trustSystem{Name: k.say("trust." + sys.key)}
		for i := range sys.n {
			steps.Steps = append(steps.Steps, k.say(fmt.Sprintf("trust.%s_%d", sys.key, i+1), "name", a.Name()))
		}
		view.Systems = append(view.Systems, steps)
	}
	if view.Code, err = drawCode(view.Address, k.say("trust.code", "address", view.Address)); err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "trust.html", view)
}

// secureAddress is where Tripwell itself is to be opened: at the address that stands on labels where there is one, since what
// a phone keeps belongs to one address.
func (s *Server) secureAddress(r *http.Request) string {
	if url := s.store.URL(); url != "" {
		return strings.ToLower(url)
	}
	return "https://" + withPort(bareHost(r.Host), s.port)
}

// trustAddress is where this page is found without any trust yet.
func (s *Server) trustAddress(r *http.Request) string {
	if s.plain == nil {
		return s.secureAddress(r)
	}
	_, port, _ := net.SplitHostPort(s.plain.Addr().String())
	host := bareHost(r.Host)
	if port == "80" {
		return "http://" + withPort(host, "443") + "/"
	}
	return "http://" + net.JoinHostPort(host, port) + "/"
}

// trustElsewhere leads whoever typed another address over http to the page.
func (s *Server) trustElsewhere(c echo.Context) error {
	if !wantsPage(c.Request()) {
		return refuse(codeNotFound, "", "Nothing is answered over http here but how to trust this server. Ask over https.")
	}
	return toPage(c, "/")
}

const (
	certificateName = "tripwell-authority.crt"
	profileName     = "tripwell-authority.mobileconfig"
)

// trustCertificate gives the authority's certificate as DER, so that the SHA-256 of the file is its fingerprint.
func (s *Server) trustCertificate(c echo.Context) error {
	a, err := s.authority()
	if err != nil {
		return err
	}
	attachment(c, certificateName)
	return sendBytes(c, http.StatusOK, "application/x-x509-ca-cert", a.cert.Raw)
}

// trustProfile gives it as the configuration profile that iPhones, iPads and Macs install.
func (s *Server) trustProfile(c echo.Context) error {
	a, err := s.authority()
	if err != nil {
		return err
	}
	attachment(c, profileName)
	return sendBytes(c, http.StatusOK, "application/x-apple-aspen-config", a.profile())
}

func attachment(c echo.Context, name string) {
	c.Response().Header().Set("Content-Disposition", mime.FormatMediaType("attachment", map[string]string{"filename": name}))
}

// profile writes a property list with one payload of type com.apple.security.root. The same authority makes the same
// profile, so that installing it twice replaces it.
func (a *Authority) profile() []byte {
	var name bytes.Buffer
	_ = xml.EscapeText(&name, []byte(a.Name()))
	inner, outer := uuid.NewSHA1(uuid.NameSpaceOID, a.cert.Raw), uuid.NewSHA1(uuid.NameSpaceURL, a.cert.Raw)
	payload := func(kind string, id uuid.UUID) string {
		return fmt.Sprintf("<key>PayloadType</key><string>%s</string><key>PayloadVersion</key><integer>1</integer><key>PayloadIdentifier</key><string>tripwell.%s</string><key>PayloadUUID</key><string>%s</string><key>PayloadDisplayName</key><string>%s</string>",
			kind, id, strings.ToUpper(id.String()), name.String())
	}
	return []byte(xml.Header + `<!DOCTYPE plist PUBLIC "-//Apple//DTD PLIST 1.0//EN" "http://www.apple.com/DTDs/PropertyList-1.0.dtd">` + "\n" +
		`<plist version="1.0"><dict>` + payload("Configuration", outer) + "<key>PayloadContent</key><array><dict>" + payload("com.apple.security.root", inner) +
		"<key>PayloadContent</key><data>" + base64.StdEncoding.EncodeToString(a.cert.Raw) + "</data></dict></array></dict></plist>\n")
}

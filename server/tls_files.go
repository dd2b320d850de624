package server

import (
	"crypto/tls"
	"crypto/x509"
	"fmt"
	"log/slog"
	"net/http"
	"os"
	"sync"
	"time"
)

// CertificateFiles is a certificate and its key in two files (PEM), read again when either changes. What cannot be used
// never takes the place of what is in use.
type CertificateFiles struct {
	cert, key string
	now       func() time.Time
	log       *slog.Logger

	mu     sync.Mutex
	inUse  *tls.Certificate
	public bool      // trusted by this machine's roots, hence by browsers too
	tried  [2]string // what the files looked like when they were last read
}

// certificateEndsSoon before its end a certificate is complained about whenever it is read.
const certificateEndsSoon = 14 * 24 * time.Hour

// ReadCertificateFiles reads both files; an error says which file and why.
func ReadCertificateFiles(cert, key string, now func() time.Time, log *slog.Logger) (*CertificateFiles, error) {
	f := &CertificateFiles{cert: cert, key: key, now: now, log: log}
	looks, err := f.looks()
	if err != nil {
		return nil, err
	}
	f.tried = looks
	pair, err := f.read()
	if err != nil {
		return nil, err
	}
	f.use(pair)
	if ends := pair.Leaf.NotAfter; now().After(ends) {
		log.Warn("the certificate is out of date: browsers refuse it", "file", cert, "ended", ends)
	}
	return f, nil
}

// looks tells whether the files were written since: time and size of each.
func (f *CertificateFiles) looks() (looks [2]string, err error) {
	for i, name := range []string{f.cert, f.key} {
		info, err := os.Stat(name)
		if err != nil {
			return looks, fmt.Errorf("the certificate cannot be read, name its files with --tls-cert and --tls-key: %w", err)
		}
		looks[i] = fmt.Sprint(info.ModTime().UnixNano(), info.Size())
	}
	return looks, nil
}

func (f *CertificateFiles) read() (*tls.Certificate, error) {
	pair, err := tls.LoadX509KeyPair(f.cert, f.key)
	if err != nil {
		return nil, fmt.Errorf("%s and %s are no certificate with its key: %w", f.cert, f.key, err)
	}
	return &pair, nil
}

func (f *CertificateFiles) use(pair *tls.Certificate) {
	between := x509.NewCertPool()
	for _, der := range pair.Certificate[1:] {
		if c, err := x509.ParseCertificate(der); err == nil {
			between.AddCert(c)
		}
	}
	_, err := pair.Leaf.Verify(x509.VerifyOptions{Intermediates: between, CurrentTime: f.now()})
	f.inUse, f.public = pair, err == nil
	if left := pair.Leaf.NotAfter.Sub(f.now()); left < certificateEndsSoon {
		f.log.Warn("the certificate ends soon", "file", f.cert, "ends", pair.Leaf.NotAfter)
	}
}

// certificate looks at the files before each handshake: two questions to the system, beside arithmetic that costs a
// thousand times as much.
func (f *CertificateFiles) certificate(*tls.ClientHelloInfo) (*tls.Certificate, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	looks, err := f.looks()
	if err == nil && looks == f.tried {
		return f.inUse, nil
	}
	if err == nil {
		f.tried = looks
		var pair *tls.Certificate
		pair, err = f.read()
		if err == nil && f.now().After(pair.Leaf.NotAfter) {
			err = fmt.Errorf("it ended on %s", pair.Leaf.NotAfter.Format(time.DateOnly))
		}
		if err == nil {
			f.use(pair)
			f.log.Info("another certificate is in use", "file", f.cert, "ends", pair.Leaf.NotAfter)
			return f.inUse, nil
		}
	} else if f.tried == [2]string{} {
		return f.inUse, nil // already said
	} else {
		f.tried = [2]string{} // whatever comes back is read
	}
	f.log.Error("the new certificate cannot be used, the one before stays in use", "file", f.cert, "err", err)
	return f.inUse, nil
}

func (f *CertificateFiles) config() *tls.Config {
	return &tls.Config{MinVersion: tls.VersionTLS12, GetCertificate: f.certificate}
}

func (f *CertificateFiles) plain(_ *Server, port string) http.Handler {
	return toSecure(port, func(asked string) string { return asked })
}

func (f *CertificateFiles) strict() bool {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.public
}

// Covers reports whether the certificate in use is for a host.
func (f *CertificateFiles) Covers(host string) error {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.inUse.Leaf.VerifyHostname(host)
}

package sign

import (
	"bytes"
	"crypto"
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/rsa"
	"crypto/sha256"
	"crypto/x509"
	"crypto/x509/pkix"
	"encoding/asn1"
	"encoding/hex"
	"encoding/pem"
	"fmt"
	"math/big"
	"slices"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"
)

// demonstration is the mark in every name of a demonstration key.
const demonstration = "DEMONSTRATION"

// documentSigning is id-kp-documentSigning. Source: RFC 9336, section 3.1.
var documentSigning = asn1.ObjectIdentifier{1, 3, 6, 1, 5, 5, 7, 3, 36}

// RootSettings describe a department's root.
type RootSettings struct {
	Department    string    // stands in the names; at most 40 characters
	NotBefore     time.Time // start of validity
	NotAfter      time.Time // end of validity
	Demonstration bool      // marks every name as DEMONSTRATION
}

// Root is a department's root: its certificate and its key. It belongs on a
// medium away from the bench; only its certificate is needed to verify.
type Root struct {
	Certificate *x509.Certificate
	Signer      crypto.Signer
}

// Person describes whom a signing certificate is issued to. Keys belong to
// persons, never to a bench.
type Person struct {
	Name      string    // as printed; at most 64 characters
	ID        string    // the department's own identifier of the person; may be empty
	NotBefore time.Time // start of validity
	NotAfter  time.Time // end of validity; one to two years are usual
}

// Key is what signs: a private key (in memory, or in a token behind
// crypto.Signer), its certificate, and the issuers' certificates up to and
// including the root.
type Key struct {
	Signer      crypto.Signer
	Certificate *x509.Certificate
	Chain       []*x509.Certificate
}

// NewRoot makes a department root: ECDSA P-256, self-signed, path length 0,
// usable for certificates and revocation lists alone.
func NewRoot(s RootSettings) (*Root, error) {
	if err := checkName("department", s.Department, 40); err != nil {
		return nil, err
	}
	if err := checkPeriod(s.NotBefore, s.NotAfter); err != nil {
		return nil, err
	}
	name := pkix.Name{CommonName: s.Department + " root", Organization: []string{s.Department}}
	if s.Demonstration {
		name.CommonName = demonstration + " " + name.CommonName
		name.Organization = []string{demonstration + " " + s.Department}
		name.OrganizationalUnit = []string{demonstration}
	}
	serial, err := newSerial()
	if err != nil {
		return nil, err
	}
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		return nil, fmt.Errorf("make the root key: %w", err)
	}
	template := &x509.Certificate{
		SerialNumber: serial, Subject: name,
		NotBefore: s.NotBefore.UTC(), NotAfter: s.NotAfter.UTC(),
		KeyUsage:              x509.KeyUsageCertSign | x509.KeyUsageCRLSign,
		BasicConstraintsValid: true, IsCA: true, MaxPathLenZero: true,
	}
	cert, err := makeCertificate(template, template, key.Public(), key)
	if err != nil {
		return nil, err
	}
	return &Root{Certificate: cert, Signer: key}, nil
}

// Issue makes a key of its own for one person, with its certificate.
func (r *Root) Issue(p Person) (*Key, error) {
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		return nil, fmt.Errorf("make the signing key: %w", err)
	}
	cert, err := r.IssueFor(key.Public(), p)
	if err != nil {
		return nil, err
	}
	return NewKey(key, cert, []*x509.Certificate{r.Certificate})
}

// IssueFor makes the certificate alone, for a key that lives elsewhere (a
// token). The certificate is for signing documents and for nothing else.
func (r *Root) IssueFor(public crypto.PublicKey, p Person) (*x509.Certificate, error) {
	if err := checkName("name of the person", p.Name, 64); err != nil {
		return nil, err
	}
	if p.ID != "" {
		if err := checkName("identifier of the person", p.ID, 64); err != nil {
			return nil, err
		}
	}
	if err := checkPeriod(p.NotBefore, p.NotAfter); err != nil {
		return nil, err
	}
	if p.NotBefore.Before(r.Certificate.NotBefore) || p.NotAfter.After(r.Certificate.NotAfter) {
		return nil, problem(Settings, "the certificate would be valid outside the root's own period")
	}
	if err := checkPublicKey(public); err != nil {
		return nil, err
	}
	serial, err := newSerial()
	if err != nil {
		return nil, err
	}
	name := pkix.Name{
		CommonName: p.Name, SerialNumber: p.ID,
		Organization:       r.Certificate.Subject.Organization,
		OrganizationalUnit: r.Certificate.Subject.OrganizationalUnit,
	}
	template := &x509.Certificate{
		SerialNumber: serial, Subject: name,
		NotBefore: p.NotBefore.UTC(), NotAfter: p.NotAfter.UTC(),
		KeyUsage:              x509.KeyUsageDigitalSignature | x509.KeyUsageContentCommitment,
		UnknownExtKeyUsage:    []asn1.ObjectIdentifier{documentSigning},
		BasicConstraintsValid: true,
	}
	return makeCertificate(template, r.Certificate, public, r.Signer)
}

// NewKey binds a private key, its certificate and the issuers, nearest first,
// ending with the self-signed root. What a verifier would refuse later is
// refused here: a key that does not belong to the certificate, a certificate
// that is not for signing documents, issuers that do not issue.
func NewKey(signer crypto.Signer, cert *x509.Certificate, chain []*x509.Certificate) (*Key, error) {
	if signer == nil || cert == nil || len(chain) == 0 {
		return nil, problem(KeyFile, "a key needs its certificate and the certificates of its issuers")
	}
	public, ok := signer.Public().(interface{ Equal(crypto.PublicKey) bool })
	if !ok || !public.Equal(cert.PublicKey) {
		return nil, problem(KeyFile, "the private key does not belong to the certificate")
	}
	root := chain[len(chain)-1]
	set := append([]*x509.Certificate{cert}, chain...)
	if err := checkChain(cert, set, Trust{Roots: []*x509.Certificate{root}, At: cert.NotBefore}); err != nil {
		return nil, err
	}
	return &Key{Signer: signer, Certificate: cert, Chain: slices.Clone(chain)}, nil
}

// IsDemonstration reports whether the certificate is marked as made for a
// demonstration. The mark warns; its absence proves nothing, the pinned root does.
func IsDemonstration(cert *x509.Certificate) bool {
	return strings.Contains(cert.Subject.String(), demonstration)
}

// Fingerprint is the SHA-256 of the certificate in groups of four, to be
// printed and hung on the wall.
func Fingerprint(cert *x509.Certificate) string {
	sum := sha256.Sum256(cert.Raw)
	digits := strings.ToUpper(hex.EncodeToString(sum[:]))
	var groups []string
	for i := 0; i < len(digits); i += 4 {
		groups = append(groups, digits[i:i+4])
	}
	return strings.Join(groups, " ")
}

// EncodeRoots writes certificates as PEM, the form of root.pem.
func EncodeRoots(roots ...*x509.Certificate) []byte {
	var out bytes.Buffer
	for _, root := range roots {
		out.Write(pem.EncodeToMemory(&pem.Block{Type: "CERTIFICATE", Bytes: root.Raw}))
	}
	return out.Bytes()
}

// LoadRoots reads the pinned roots from PEM. Each must be a self-signed
// certificate authority with an allowed key; anything else in the file, and a
// file without a root, is refused.
func LoadRoots(text []byte) ([]*x509.Certificate, error) {
	var roots []*x509.Certificate
	for rest := bytes.TrimSpace(text); len(rest) > 0; rest = bytes.TrimSpace(rest) {
		if !bytes.HasPrefix(rest, []byte("-----BEGIN CERTIFICATE-----")) {
			return nil, problem(UntrustedRoot, "the file of roots holds something besides certificates")
		}
		var block *pem.Block
		block, rest = pem.Decode(rest)
		if block == nil || len(block.Headers) != 0 {
			return nil, problem(UntrustedRoot, "the file of roots is damaged")
		}
		root, err := x509.ParseCertificate(block.Bytes)
		if err != nil {
			return nil, problem(UntrustedRoot, "root certificate: %v", err)
		}
		if err := checkRoot(root); err != nil {
			return nil, err
		}
		roots = append(roots, root)
	}
	if len(roots) == 0 {
		return nil, problem(UntrustedRoot, "the file of roots holds no certificate")
	}
	return roots, nil
}

func makeCertificate(template, parent *x509.Certificate, public crypto.PublicKey, signer crypto.Signer) (*x509.Certificate, error) {
	der, err := x509.CreateCertificate(rand.Reader, template, parent, public, signer)
	if err != nil {
		return nil, fmt.Errorf("make the certificate of %q: %w", template.Subject.CommonName, err)
	}
	return x509.ParseCertificate(der)
}

// newSerial draws 126 random bits below a fixed leading one: positive and of
// one length, as RFC 5280 section 4.1.2.2 asks (at most 20 octets).
func newSerial() (*big.Int, error) {
	random, err := rand.Int(rand.Reader, new(big.Int).Lsh(big.NewInt(1), 126))
	if err != nil {
		return nil, fmt.Errorf("draw a serial number: %w", err)
	}
	return random.SetBit(random, 126, 1), nil
}

// checkName keeps names printable; the upper bounds of RFC 5280, appendix A,
// are 64 characters for a common name, an organization and a serial number.
func checkName(what, name string, most int) error {
	if name == "" || !utf8.ValidString(name) || utf8.RuneCountInString(name) > most {
		return problem(Settings, "%s must have 1 to %d characters", what, most)
	}
	for _, r := range name {
		if !unicode.IsPrint(r) {
			return problem(Settings, "%s holds a character that cannot be printed: %U", what, r)
		}
	}
	return nil
}

func checkPeriod(from, to time.Time) error {
	if from.IsZero() || !to.After(from) {
		return problem(Settings, "the period of validity must have a start and a later end")
	}
	return nil
}

// checkPublicKey is the allow-list of keys: ECDSA on P-256 or P-384, RSA from 2048 bits.
func checkPublicKey(public crypto.PublicKey) error {
	switch key := public.(type) {
	case *ecdsa.PublicKey:
		if key.Curve == elliptic.P256() || key.Curve == elliptic.P384() {
			return nil
		}
	case *rsa.PublicKey:
		if key.N.BitLen() >= 2048 && key.N.BitLen() <= 8192 {
			return nil
		}
	}
	return problem(Algorithm, "only ECDSA on P-256 or P-384 and RSA of 2048 to 8192 bits are allowed")
}

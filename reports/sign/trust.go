package sign

import (
	"bytes"
	"crypto/x509"
	"errors"
	"slices"
	"time"
)

// Trust is what a verifier brings along; nothing of it is taken from the file.
type Trust struct {
	Roots []*x509.Certificate // pinned, compared byte by byte; from LoadRoots
	At    time.Time           // when the certificates must have been valid
}

// mostCertificates bounds the chain: signer, at most two between, root.
const mostCertificates = 4

// allowedCertificateSignatures is the allow-list for signatures on certificates.
var allowedCertificateSignatures = []x509.SignatureAlgorithm{
	x509.ECDSAWithSHA256, x509.ECDSAWithSHA384, x509.SHA256WithRSA, x509.SHA384WithRSA,
}

// checkChain requires that set is exactly the chain of the signer: the signer,
// the issuers between, and a root that is pinned byte by byte. One certificate
// too many is refused, for nobody would have looked at it.
func checkChain(signer *x509.Certificate, set []*x509.Certificate, trust Trust) error {
	if trust.At.IsZero() {
		return problem(Settings, "no time is given at which the certificates must be valid")
	}
	if err := checkSigner(signer); err != nil {
		return err
	}
	if len(set) < 2 || len(set) > mostCertificates {
		return problem(Certificates, "%d certificates where 2 to %d were expected", len(set), mostCertificates)
	}
	roots, between := x509.NewCertPool(), x509.NewCertPool()
	pinned := 0
	for _, cert := range set {
		if err := checkPublicKey(cert.PublicKey); err != nil {
			return err
		}
		if !slices.Contains(allowedCertificateSignatures, cert.SignatureAlgorithm) {
			return problem(Algorithm, "certificate of %q is signed with %v", cert.Subject.CommonName, cert.SignatureAlgorithm)
		}
		switch {
		case holds(trust.Roots, cert):
			if err := checkRoot(cert); err != nil {
				return err
			}
			roots.AddCert(cert)
			pinned++
		case !cert.Equal(signer):
			between.AddCert(cert)
		}
	}
	if pinned != 1 {
		return problem(UntrustedRoot, "%d of the embedded certificates are pinned roots", pinned)
	}
	chains, err := signer.Verify(x509.VerifyOptions{
		Roots: roots, Intermediates: between, CurrentTime: trust.At,
		KeyUsages: []x509.ExtKeyUsage{x509.ExtKeyUsageAny}, // ours is checked in checkSigner
	})
	if err != nil {
		return chainProblem(err)
	}
	for _, chain := range chains {
		if len(chain) == len(set) && !slices.ContainsFunc(set, func(c *x509.Certificate) bool { return !holds(chain, c) }) {
			return nil
		}
	}
	return problem(Certificates, "a certificate is embedded that is no part of the signer's chain")
}

// chainProblem sorts the library's reasons into our classes.
func chainProblem(err error) error {
	var unknown x509.UnknownAuthorityError
	var invalid x509.CertificateInvalidError
	switch {
	case errors.As(err, &unknown):
		return problem(UntrustedRoot, "%v", err)
	case errors.As(err, &invalid) && invalid.Reason == x509.Expired:
		return problem(Validity, "%v", err)
	}
	return problem(Certificate, "%v", err)
}

// checkSigner is the policy for a person's certificate: not an authority, for
// signing with commitment (RFC 5280, 4.2.1.3), for documents (RFC 9336).
func checkSigner(cert *x509.Certificate) error {
	switch {
	case cert.IsCA:
		return problem(Certificate, "it is that of an authority")
	case cert.KeyUsage&x509.KeyUsageContentCommitment == 0:
		return problem(Certificate, "its key usage lacks content commitment (non-repudiation)")
	case cert.KeyUsage&(x509.KeyUsageCertSign|x509.KeyUsageCRLSign) != 0:
		return problem(Certificate, "its key may sign certificates or revocation lists")
	}
	for _, usage := range cert.UnknownExtKeyUsage {
		if usage.Equal(documentSigning) {
			return checkPublicKey(cert.PublicKey)
		}
	}
	return problem(Certificate, "its extended key usage lacks document signing")
}

// checkRoot is the policy for a root that may be pinned.
func checkRoot(cert *x509.Certificate) error {
	if !cert.BasicConstraintsValid || !cert.IsCA || cert.KeyUsage&x509.KeyUsageCertSign == 0 {
		return problem(UntrustedRoot, "%q is not a certificate authority", cert.Subject.CommonName)
	}
	if !bytes.Equal(cert.RawSubject, cert.RawIssuer) || cert.CheckSignatureFrom(cert) != nil {
		return problem(UntrustedRoot, "%q is not signed by itself", cert.Subject.CommonName)
	}
	return checkPublicKey(cert.PublicKey)
}

func holds(certs []*x509.Certificate, cert *x509.Certificate) bool {
	return slices.ContainsFunc(certs, cert.Equal)
}

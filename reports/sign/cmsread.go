package sign

import (
	"bytes"
	"crypto"
	"crypto/ecdsa"
	"crypto/rsa"
	"crypto/sha256"
	"crypto/x509"
	"fmt"
)

// mostCMS bounds a signature with its content: a statement is a few kilobytes.
const mostCMS = 16 << 20

// VerifyAttached checks a signature that holds its content, and returns the
// content and the signer's certificate. On any error neither is returned.
func VerifyAttached(der []byte, trust Trust) ([]byte, *x509.Certificate, error) {
	read, err := readCMS(der)
	if err != nil {
		return nil, nil, err
	}
	if !read.attached {
		return nil, nil, problem(CMSEncoding, "the signature holds no content")
	}
	signer, err := read.verify(der, sha256.Sum256(read.content), trust)
	if err != nil {
		return nil, nil, err
	}
	return bytes.Clone(read.content), signer, nil
}

// VerifyDetached checks a signature over content given by its SHA-256.
func VerifyDetached(der []byte, digest [sha256.Size]byte, trust Trust) (*x509.Certificate, error) {
	read, err := readCMS(der)
	if err != nil {
		return nil, err
	}
	if read.attached {
		return nil, problem(CMSEncoding, "the signature holds a content of its own")
	}
	return read.verify(der, digest, trust)
}

// cmsRead is what a signature says, before anything of it is believed.
type cmsRead struct {
	content    []byte
	attached   bool
	set        []*x509.Certificate
	sid        []byte // content of issuerAndSerialNumber
	attributes []byte // content of signedAttrs
	algorithm  []byte
	signature  []byte
}

// readCMS takes the structure apart. It may be a little generous, for verify
// encodes again what was read and compares every byte.
func readCMS(der []byte) (*cmsRead, error) {
	if len(der) > mostCMS {
		return nil, problem(TooLarge, "a signature of %d bytes", len(der))
	}
	top := derReader{rest: der}
	info := top.enter(tagSequence, "content info")
	top.end("signature")
	info.expect(derSignedData, "content type")
	explicit := info.enter(tagContext0, "signed data")
	info.end("content info")
	data := explicit.enter(tagSequence, "signed data")
	explicit.end("signed data")
	data.expect(derVersion1, "version")
	digests := data.enter(tagSet, "digest algorithms")
	encapsulated := data.enter(tagSequence, "encapsulated content")
	certs := data.enter(tagContext0, "certificates")
	if data.err == nil && data.next() == tagContext1 {
		return nil, problem(Certificates, "a revocation list is embedded")
	}
	signers := data.enter(tagSet, "signer infos")
	data.end("signed data")
	for _, r := range []*derReader{&top, info, explicit, data} {
		if r.err != nil {
			return nil, r.err
		}
	}
	if !bytes.Equal(digests.rest, derSHA256) {
		return nil, problem(Algorithm, "the digest algorithm is not SHA-256")
	}
	read := &cmsRead{}
	encapsulated.expect(derData, "content type")
	if encapsulated.err == nil && len(encapsulated.rest) > 0 {
		octets := encapsulated.enter(tagContext0, "content")
		encapsulated.end("encapsulated content")
		read.content, read.attached = octets.enter(tagOctets, "content").rest, true
		octets.end("content")
		if octets.err != nil {
			return nil, octets.err
		}
	}
	if encapsulated.err != nil {
		return nil, encapsulated.err
	}
	for certs.err == nil && len(certs.rest) > 0 {
		if len(read.set) == mostCertificates {
			return nil, problem(Certificates, "more than %d certificates", mostCertificates)
		}
		raw := certs.element(tagSequence, "certificate")
		if certs.err != nil {
			break
		}
		cert, err := x509.ParseCertificate(raw)
		if err != nil {
			return nil, problem(Certificates, "%v", err)
		}
		read.set = append(read.set, cert)
	}
	if certs.err != nil {
		return nil, certs.err
	}
	return read, read.signer(signers)
}

// signer reads the one SignerInfo.
func (read *cmsRead) signer(signers *derReader) error {
	info := signers.enter(tagSequence, "signer info")
	if signers.err != nil || len(signers.rest) > 0 {
		return problem(Signers, "none, or more than one")
	}
	info.expect(derVersion1, "signer info version")
	read.sid = info.enter(tagSequence, "signer identifier").rest
	digest := info.element(tagSequence, "digest algorithm")
	read.attributes = info.enter(tagContext0, "signed attributes").rest
	read.algorithm = info.element(tagSequence, "signature algorithm")
	read.signature = info.enter(tagOctets, "signature").rest
	if info.err != nil {
		return info.err
	}
	if len(info.rest) > 0 {
		return problem(Attributes, "an unsigned attribute, which nothing protects")
	}
	if !bytes.Equal(digest, derSHA256) {
		return problem(Algorithm, "the signer's digest algorithm is not SHA-256")
	}
	return nil
}

// verify believes what was read, or says why not.
func (read *cmsRead) verify(der []byte, digest [sha256.Size]byte, trust Trust) (*x509.Certificate, error) {
	var signer *x509.Certificate
	for _, cert := range read.set {
		if bytes.Equal(read.sid, append(bytes.Clone(cert.RawIssuer), derSerial(cert)...)) {
			if signer != nil {
				return nil, problem(Certificates, "two certificates of one issuer and serial number")
			}
			signer = cert
		}
	}
	if signer == nil {
		return nil, problem(SignerIdentity, "the signer's certificate is not embedded")
	}
	algorithm, err := signatureAlgorithm(signer)
	if err != nil {
		return nil, err
	}
	if !bytes.Equal(read.algorithm, algorithm) {
		return nil, problem(Algorithm, "the signature algorithm is not the one of the signer's key")
	}
	if err := read.checkAttributes(digest, signer); err != nil {
		return nil, err
	}
	if err := checkSignature(tlv(tagSet, read.attributes), read.signature, signer); err != nil {
		return nil, err
	}
	again, err := encodeCMS(read.content, read.attached, read.set, signer, read.attributes, read.signature)
	if err != nil {
		return nil, err
	}
	if !bytes.Equal(again, der) {
		return nil, problem(CMSEncoding, "it would be encoded otherwise")
	}
	if err := checkChain(signer, read.set, trust); err != nil {
		return nil, err
	}
	return signer, nil
}

// checkAttributes compares with the attributes this package would have
// written; the walk before only finds out which one differs.
func (read *cmsRead) checkAttributes(digest [sha256.Size]byte, signer *x509.Certificate) error {
	if bytes.Equal(read.attributes, signedAttributes(digest, signer)) {
		return nil
	}
	list := &derReader{rest: read.attributes}
	for list.err == nil && len(list.rest) > 0 {
		attribute := list.enter(tagSequence, "attribute")
		switch {
		case bytes.HasPrefix(attribute.rest, derContentType):
		case bytes.HasPrefix(attribute.rest, derMessageDigest):
			if !bytes.Equal(attribute.rest[len(derMessageDigest):], tlv(tagSet, tlv(tagOctets, digest[:]))) {
				return problem(Digest, "its SHA-256 is not the one that was signed")
			}
		case bytes.HasPrefix(attribute.rest, derSigningCertV2):
			if !bytes.Equal(attribute.rest[len(derSigningCertV2):], tlv(tagSet, signingCertificate(signer))) {
				return problem(SignerIdentity, "the signed name of the certificate is another one's")
			}
		default:
			return problem(Attributes, "an attribute besides content type, digest and certificate")
		}
	}
	return problem(Attributes, "not exactly content type, digest and certificate, each once and in order")
}

func checkSignature(message, signature []byte, signer *x509.Certificate) error {
	sum := sha256.Sum256(message)
	switch public := signer.PublicKey.(type) {
	case *ecdsa.PublicKey:
		low, err := lowS(signature, public)
		if err != nil {
			return err
		}
		if !bytes.Equal(low, signature) {
			return problem(Signature, "it is the twin of a signature, with the larger s, or oddly encoded")
		}
		if ecdsa.VerifyASN1(public, sum[:], signature) {
			return nil
		}
	case *rsa.PublicKey:
		if rsa.VerifyPKCS1v15(public, crypto.SHA256, sum[:], signature) == nil {
			return nil
		}
	}
	return problem(Signature, "it does not fit the certificate of %q", signer.Subject.CommonName)
}

// derReader takes DER apart from left to right; after the first error every
// further step gives empty readers, and the error stays.
type derReader struct {
	rest []byte
	err  error
}

func (r *derReader) next() byte {
	if len(r.rest) == 0 {
		return 0
	}
	return r.rest[0]
}

// element takes one whole element with the given tag.
func (r *derReader) element(tag byte, what string) []byte {
	if r.err != nil {
		return nil
	}
	header, n, err := derLength(r.rest)
	if err != nil || r.rest[0] != tag {
		r.err = problem(CMSEncoding, "%s is missing or malformed", what)
		return nil
	}
	whole := r.rest[: header+n : header+n]
	r.rest = r.rest[header+n:]
	return whole
}

// enter takes one element and gives a reader of its content.
func (r *derReader) enter(tag byte, what string) *derReader {
	whole := r.element(tag, what)
	if r.err != nil {
		return &derReader{err: r.err}
	}
	header, _, _ := derLength(whole)
	return &derReader{rest: whole[header:]}
}

func (r *derReader) expect(der []byte, what string) {
	if r.err == nil && !bytes.HasPrefix(r.rest, der) {
		r.err = problem(CMSEncoding, "%s is not the expected one", what)
	}
	if r.err == nil {
		r.rest = r.rest[len(der):]
	}
}

func (r *derReader) end(what string) {
	if r.err == nil && len(r.rest) > 0 {
		r.err = problem(CMSEncoding, "%s is followed by further bytes", what)
	}
}

// derLength gives the lengths of header and content of the first element:
// single-byte tag, definite length in the shortest form, all bytes present.
func derLength(b []byte) (header, n int, err error) {
	if len(b) < 2 || b[0]&0x1f == 0x1f {
		return 0, 0, fmt.Errorf("no element")
	}
	header, n = 2, int(b[1])
	if n >= 0x80 {
		octets := n - 0x80
		if octets < 1 || octets > 4 || len(b) < 2+octets || b[2] == 0 {
			return 0, 0, fmt.Errorf("bad length")
		}
		n = 0
		for _, octet := range b[2 : 2+octets] {
			n = n<<8 | int(octet)
		}
		header += octets
		if n < 0x80 || n > mostCMS {
			return 0, 0, fmt.Errorf("bad length")
		}
	}
	if n > len(b)-header {
		return 0, 0, fmt.Errorf("cut short")
	}
	return header, n, nil
}

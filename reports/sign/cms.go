package sign

import (
	"bytes"
	"crypto"
	"crypto/ecdsa"
	"crypto/rand"
	"crypto/sha256"
	"crypto/x509"
	"encoding/asn1"
	"math/big"
	"slices"
)

// DER of what never changes in our signatures. Sources: RFC 5652 (signed-data,
// data, attributes), RFC 5754 section 2 (SHA-256 without parameters) and
// sections 3.2 and 3.3 (RSA, ECDSA), RFC 5035 (signing-certificate-v2).
var (
	derSignedData      = []byte{0x06, 0x09, 0x2a, 0x86, 0x48, 0x86, 0xf7, 0x0d, 0x01, 0x07, 0x02}
	derData            = []byte{0x06, 0x09, 0x2a, 0x86, 0x48, 0x86, 0xf7, 0x0d, 0x01, 0x07, 0x01}
	derContentType     = []byte{0x06, 0x09, 0x2a, 0x86, 0x48, 0x86, 0xf7, 0x0d, 0x01, 0x09, 0x03}
	derMessageDigest   = []byte{0x06, 0x09, 0x2a, 0x86, 0x48, 0x86, 0xf7, 0x0d, 0x01, 0x09, 0x04}
	derSigningCertV2   = []byte{0x06, 0x0b, 0x2a, 0x86, 0x48, 0x86, 0xf7, 0x0d, 0x01, 0x09, 0x10, 0x02, 0x2f}
	derSHA256          = []byte{0x30, 0x0b, 0x06, 0x09, 0x60, 0x86, 0x48, 0x01, 0x65, 0x03, 0x04, 0x02, 0x01}
	derECDSAWithSHA256 = []byte{0x30, 0x0a, 0x06, 0x08, 0x2a, 0x86, 0x48, 0xce, 0x3d, 0x04, 0x03, 0x02}
	derSHA256WithRSA   = []byte{0x30, 0x0d, 0x06, 0x09, 0x2a, 0x86, 0x48, 0x86, 0xf7, 0x0d, 0x01, 0x01, 0x0b, 0x05, 0x00}
	derVersion1        = []byte{0x02, 0x01, 0x01}
)

// Tags used; the context ones are constructed.
const (
	tagInteger  = 0x02
	tagOctets   = 0x04
	tagSequence = 0x30
	tagSet      = 0x31
	tagContext0 = 0xa0
	tagContext1 = 0xa1
	tagContext4 = 0xa4
)

// SignAttached signs content and embeds it: one DER file that anybody can
// check, also with openssl cms -verify -cades.
func SignAttached(content []byte, key *Key) ([]byte, error) {
	return signCMS(sha256.Sum256(content), content, true, key)
}

// SignDetached signs content that stands elsewhere, given by its SHA-256.
// With an ECDSA or RSA key in memory the bytes are a function of key and
// digest alone (RFC 6979; PKCS #1 v1.5 has no randomness), so that a report
// can be made again.
func SignDetached(digest [sha256.Size]byte, key *Key) ([]byte, error) {
	return signCMS(digest, nil, false, key)
}

func signCMS(digest [sha256.Size]byte, content []byte, attached bool, key *Key) ([]byte, error) {
	attributes := signedAttributes(digest, key.Certificate)
	signature, err := signBytes(tlv(tagSet, attributes), key.Signer)
	if err != nil {
		return nil, err
	}
	set := append([]*x509.Certificate{key.Certificate}, key.Chain...)
	return encodeCMS(content, attached, set, key.Certificate, attributes, signature)
}

// encodeCMS is the one place that lays out a signature. The verifier calls it
// too: what it has read must encode to the very bytes it was given.
func encodeCMS(content []byte, attached bool, set []*x509.Certificate, signer *x509.Certificate, attributes, signature []byte) ([]byte, error) {
	algorithm, err := signatureAlgorithm(signer)
	if err != nil {
		return nil, err
	}
	encapsulated := derData
	if attached {
		encapsulated = slices.Concat(derData, tlv(tagContext0, tlv(tagOctets, content)))
	}
	var raw [][]byte
	for _, cert := range set {
		raw = append(raw, cert.Raw)
	}
	return tlv(tagSequence, derSignedData, tlv(tagContext0, tlv(tagSequence,
		derVersion1,
		tlv(tagSet, derSHA256),
		tlv(tagSequence, encapsulated),
		tlv(tagContext0, sorted(raw...)),
		tlv(tagSet, tlv(tagSequence,
			derVersion1,
			tlv(tagSequence, signer.RawIssuer, derSerial(signer)),
			derSHA256,
			tlv(tagContext0, attributes),
			algorithm,
			tlv(tagOctets, signature),
		)),
	))), nil
}

// signedAttributes gives the content of the SET: content-type, message-digest
// and signing-certificate-v2, and no signing-time (EN 319 142-1, section 6.3:
// the claimed time stands in the PDF's /M).
func signedAttributes(digest [sha256.Size]byte, signer *x509.Certificate) []byte {
	return sorted(
		tlv(tagSequence, derContentType, tlv(tagSet, derData)),
		tlv(tagSequence, derMessageDigest, tlv(tagSet, tlv(tagOctets, digest[:]))),
		tlv(tagSequence, derSigningCertV2, tlv(tagSet, signingCertificate(signer))),
	)
}

// signingCertificate is SigningCertificateV2 (RFC 5035, section 3) with the
// default hash SHA-256, which DER leaves out, and with issuer and serial.
func signingCertificate(signer *x509.Certificate) []byte {
	sum := sha256.Sum256(signer.Raw)
	issuer := tlv(tagSequence, tlv(tagSequence, tlv(tagContext4, signer.RawIssuer)), derSerial(signer))
	return tlv(tagSequence, tlv(tagSequence, tlv(tagSequence, tlv(tagOctets, sum[:]), issuer)))
}

func derSerial(cert *x509.Certificate) []byte {
	// A big.Int always marshals.
	der, _ := asn1.Marshal(cert.SerialNumber)
	return der
}

func signatureAlgorithm(signer *x509.Certificate) ([]byte, error) {
	if err := checkPublicKey(signer.PublicKey); err != nil {
		return nil, err
	}
	if _, ok := signer.PublicKey.(*ecdsa.PublicKey); ok {
		return derECDSAWithSHA256, nil
	}
	return derSHA256WithRSA, nil
}

// signBytes signs the SHA-256 of message. An ECDSA signature (r, s) has a
// twin (r, n-s) that verifies too; only the one with the smaller s is written
// and accepted, so that a signature cannot be exchanged without its key.
func signBytes(message []byte, signer crypto.Signer) ([]byte, error) {
	sum := sha256.Sum256(message)
	if key, ok := signer.(*ecdsa.PrivateKey); ok {
		signature, err := key.Sign(nil, sum[:], crypto.SHA256) // nil: deterministic
		if err != nil {
			return nil, problem(KeyFile, "sign: %v", err)
		}
		return lowS(signature, &key.PublicKey)
	}
	signature, err := signer.Sign(rand.Reader, sum[:], crypto.SHA256)
	if err != nil {
		return nil, problem(KeyFile, "sign: %v", err)
	}
	if public, ok := signer.Public().(*ecdsa.PublicKey); ok {
		return lowS(signature, public)
	}
	return signature, nil
}

// lowS replaces s by n - s where that is smaller.
func lowS(signature []byte, public *ecdsa.PublicKey) ([]byte, error) {
	var pair struct{ R, S *big.Int }
	if rest, err := asn1.Unmarshal(signature, &pair); err != nil || len(rest) != 0 {
		return nil, problem(Signature, "not two integers")
	}
	n := public.Curve.Params().N
	if other := new(big.Int).Sub(n, pair.S); other.Cmp(pair.S) < 0 {
		pair.S = other
	}
	return asn1.Marshal(pair)
}

// tlv encodes one DER value from its parts.
func tlv(tag byte, parts ...[]byte) []byte {
	n := 0
	for _, part := range parts {
		n += len(part)
	}
	out := append(make([]byte, 0, n+6), tag)
	switch {
	case n < 0x80:
		out = append(out, byte(n))
	case n < 0x100:
		out = append(out, 0x81, byte(n))
	case n < 0x10000:
		out = append(out, 0x82, byte(n>>8), byte(n))
	case n < 0x1000000:
		out = append(out, 0x83, byte(n>>16), byte(n>>8), byte(n))
	default:
		out = append(out, 0x84, byte(n>>24), byte(n>>16), byte(n>>8), byte(n))
	}
	for _, part := range parts {
		out = append(out, part...)
	}
	return out
}

// sorted joins the members of a SET OF in DER's order (X.690, section 11.6).
func sorted(members ...[]byte) []byte {
	members = slices.Clone(members)
	slices.SortFunc(members, bytes.Compare)
	return bytes.Join(members, nil)
}

// Package sign seals a report and reads sealed reports back.
//
// It makes the keys (a department root and personal signing certificates),
// writes CMS signatures (RFC 5652 with the CAdES B-B attributes), turns the
// layout's PDF into one revision with one signature (PAdES B-B, DocMDP P=1),
// and reads such a file strictly: it accepts only what this package could have
// written. It is a leaf: it knows nothing of runs, records or verdicts.
//
// What it is not: a general PDF reader or CMS library, a validator of other
// people's files, or a source of trusted time. What the pages say is not
// checked here: the caller makes the report again and calls
// [SignedPDF.SameAs], the only guard against a page that shows other figures
// than its record.
//
// Order of use: [NewRoot], [Root.Issue], [SaveP12]; later [LoadP12],
// [SignAttached] for a statement, [Finish] and [SignPDF] for the report;
// anywhere [LoadRoots], [ReadSigned], [SignedPDF.Verify], [VerifyAttached].
package sign

import "fmt"

// Code names a class of problem. It is an error itself, so that a caller asks
// errors.Is(err, sign.ByteRange).
type Code string

// The classes of problem. The order is that of the checks.
const (
	TooLarge        Code = "too_large"
	Header          Code = "header"
	Syntax          Code = "syntax"
	DuplicateKey    Code = "duplicate_key"
	Objects         Code = "objects"
	CrossReference  Code = "cross_reference"
	Revisions       Code = "revisions"
	Encrypted       Code = "encrypted"
	NotCanonical    Code = "not_canonical"
	ActiveContent   Code = "active_content"
	Unexpected      Code = "unexpected_content"
	Annotation      Code = "annotation"
	SignatureField  Code = "signature_field"
	ByteRange       Code = "byte_range"
	Gap             Code = "gap"
	Compression     Code = "compression"
	AttachedFile    Code = "attached_file"
	CMSEncoding     Code = "cms_encoding"
	Algorithm       Code = "algorithm"
	Signers         Code = "signers"
	Attributes      Code = "attributes"
	Digest          Code = "digest"
	SignerIdentity  Code = "signer_identity"
	Signature       Code = "signature"
	Certificate     Code = "certificate"
	Certificates    Code = "certificates"
	UntrustedRoot   Code = "untrusted_root"
	Validity        Code = "validity"
	Rendering       Code = "rendering"
	KeyFile         Code = "key_file"
	PassPhrase      Code = "pass_phrase"
	Settings        Code = "settings"
	LayoutsDocument Code = "layouts_document"
)

// problemTexts says each class in words; the operator reads these.
var problemTexts = map[Code]string{
	TooLarge:        "the file is larger than any report",
	Header:          "the file does not begin as a report does",
	Syntax:          "the file is not written as a report is",
	DuplicateKey:    "an entry is given twice, so that two readers may see two documents",
	Objects:         "an object is missing, repeated or not used by the document",
	CrossReference:  "the table of objects does not match the file",
	Revisions:       "something was added or saved after signing",
	Encrypted:       "the file is encrypted, which a report never is",
	NotCanonical:    "the bytes are not those this program would have written",
	ActiveContent:   "the file holds scripts, actions or links, which a report never does",
	Unexpected:      "the file holds something a report never holds",
	Annotation:      "the file holds an annotation or a form field that is not the report's own",
	SignatureField:  "the signature's description in the file is not a report's",
	ByteRange:       "the signature does not cover the whole file",
	Gap:             "the place of the signature holds something else besides",
	Compression:     "a compressed part cannot be unpacked, or holds hidden bytes",
	AttachedFile:    "an attached file is not described or stored as a report's",
	CMSEncoding:     "the signature is not encoded strictly",
	Algorithm:       "the signature uses an algorithm or a key that is not allowed",
	Signers:         "the signature must have exactly one signer",
	Attributes:      "the signature's attributes are not those of a report",
	Digest:          "the content was changed after signing",
	SignerIdentity:  "the signature does not name its own certificate",
	Signature:       "the signature was not made with the signer's key",
	Certificate:     "the signer's certificate is not one for signing reports",
	Certificates:    "the certificates in the signature are not exactly the signer's chain",
	UntrustedRoot:   "the signer's certificate does not come from the department root that is trusted here",
	Validity:        "a certificate was not valid at the time of signing",
	Rendering:       "the pages or attachments differ from those made again from the record",
	KeyFile:         "the key file cannot be used",
	PassPhrase:      "the pass phrase cannot be used",
	Settings:        "a setting cannot be used",
	LayoutsDocument: "the layout's document is not one this program can finish",
}

// Error says the class in words.
func (c Code) Error() string {
	if text, ok := problemTexts[c]; ok {
		return text
	}
	return "unknown problem " + string(c)
}

// Problem is every error of this package that speaks about what was read:
// its class, and where or what exactly.
type Problem struct {
	Code   Code
	Detail string
}

// Error gives the class in words, then the detail.
func (p *Problem) Error() string {
	if p.Detail == "" {
		return p.Code.Error()
	}
	return p.Code.Error() + ": " + p.Detail
}

// Unwrap gives the class, for errors.Is.
func (p *Problem) Unwrap() error { return p.Code }

// problem makes one; the detail is a format.
func problem(code Code, format string, args ...any) *Problem {
	return &Problem{Code: code, Detail: fmt.Sprintf(format, args...)}
}

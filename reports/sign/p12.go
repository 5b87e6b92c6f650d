package sign

import (
	"crypto"
	"crypto/x509"
	"errors"
	"io"
	"os"
	"path/filepath"
	"unicode/utf8"

	"software.sslmate.com/src/go-pkcs12"
)

const (
	// rounds of the key derivation. Source: OWASP password storage cheat
	// sheet (PBKDF2 with HMAC-SHA-256), from memory.
	rounds = 600_000
	// shortestPassPhrase, in characters. Source: NIST SP 800-63B, section 5.1.1.1.
	shortestPassPhrase = 8
	// mostKeyFile bounds a .p12 file in bytes.
	mostKeyFile = 256 << 10
)

// EncodeP12 writes a key and its chain as PKCS #12 (AES-256, PBKDF2 with
// 600,000 rounds), which openssl reads too. The work of the derivation is
// meant: it takes a good part of a second.
func EncodeP12(key *Key, passPhrase string) ([]byte, error) {
	return encodeP12(key.Signer, key.Certificate, key.Chain, passPhrase)
}

// DecodeP12 reads a key written by EncodeP12, or a hospital's own if its
// certificates pass NewKey. A wrong pass phrase is a PassPhrase problem.
func DecodeP12(file []byte, passPhrase string) (*Key, error) {
	signer, cert, chain, err := decodeP12(file, passPhrase)
	if err != nil {
		return nil, err
	}
	return NewKey(signer, cert, chain)
}

// EncodeP12 writes the root with its key, for a medium away from the bench.
func (r *Root) EncodeP12(passPhrase string) ([]byte, error) {
	return encodeP12(r.Signer, r.Certificate, nil, passPhrase)
}

// DecodeRootP12 reads a root with its key.
func DecodeRootP12(file []byte, passPhrase string) (*Root, error) {
	signer, cert, _, err := decodeP12(file, passPhrase)
	if err != nil {
		return nil, err
	}
	if err := checkRoot(cert); err != nil {
		return nil, err
	}
	return &Root{Certificate: cert, Signer: signer}, nil
}

// SaveP12 writes a key file that did not exist before, whole or not at all,
// readable by its owner alone.
func SaveP12(path string, key *Key, passPhrase string) error {
	file, err := EncodeP12(key, passPhrase)
	if err != nil {
		return err
	}
	return saveKeyFile(path, file)
}

// LoadP12 reads a key file. It must be a regular file, and on systems that
// know owners it must belong to this user, and neither it nor its folder may
// be open to others.
func LoadP12(path, passPhrase string) (*Key, error) {
	file, err := loadKeyFile(path)
	if err != nil {
		return nil, err
	}
	return DecodeP12(file, passPhrase)
}

// SaveRootP12 is SaveP12 for a root with its key.
func SaveRootP12(path string, root *Root, passPhrase string) error {
	file, err := root.EncodeP12(passPhrase)
	if err != nil {
		return err
	}
	return saveKeyFile(path, file)
}

// LoadRootP12 is LoadP12 for a root with its key.
func LoadRootP12(path, passPhrase string) (*Root, error) {
	file, err := loadKeyFile(path)
	if err != nil {
		return nil, err
	}
	return DecodeRootP12(file, passPhrase)
}

func encodeP12(signer crypto.Signer, cert *x509.Certificate, chain []*x509.Certificate, passPhrase string) ([]byte, error) {
	if !utf8.ValidString(passPhrase) || utf8.RuneCountInString(passPhrase) < shortestPassPhrase {
		return nil, problem(PassPhrase, "it must have at least %d characters", shortestPassPhrase)
	}
	file, err := pkcs12.Modern2023.WithIterations(rounds).Encode(signer, cert, chain, passPhrase)
	if err != nil {
		return nil, problem(KeyFile, "write: %v", err)
	}
	return file, nil
}

func decodeP12(file []byte, passPhrase string) (crypto.Signer, *x509.Certificate, []*x509.Certificate, error) {
	if len(file) > mostKeyFile {
		return nil, nil, nil, problem(KeyFile, "larger than %d bytes", mostKeyFile)
	}
	if passPhrase == "" {
		return nil, nil, nil, problem(PassPhrase, "it is empty")
	}
	private, cert, chain, err := pkcs12.DecodeChain(file, passPhrase)
	if errors.Is(err, pkcs12.ErrIncorrectPassword) || errors.Is(err, pkcs12.ErrDecryption) {
		return nil, nil, nil, problem(PassPhrase, "it does not open the key file")
	}
	if err != nil {
		return nil, nil, nil, problem(KeyFile, "read: %v", err)
	}
	signer, ok := private.(crypto.Signer)
	if !ok {
		return nil, nil, nil, problem(KeyFile, "a key of type %T cannot sign", private)
	}
	return signer, cert, chain, nil
}

// saveKeyFile goes through a temporary name and a link, so that a file that
// exists is never replaced: a lost key cannot be had back.
func saveKeyFile(path string, content []byte) (err error) {
	temporary, err := os.CreateTemp(filepath.Dir(path), ".key-*") // 0600
	if err != nil {
		return problem(KeyFile, "%v", err)
	}
	defer os.Remove(temporary.Name())
	_, err = temporary.Write(content)
	err = errors.Join(err, temporary.Sync(), temporary.Close())
	if err != nil {
		return problem(KeyFile, "%v", err)
	}
	if err := placeKeyFile(temporary.Name(), path); err != nil {
		return problem(KeyFile, "%v", err)
	}
	return nil
}

func loadKeyFile(path string) ([]byte, error) {
	// The name is looked at before opening, for opening a pipe would wait.
	if info, err := os.Lstat(path); err != nil {
		return nil, problem(KeyFile, "%v", err)
	} else if !info.Mode().IsRegular() {
		return nil, problem(KeyFile, "%s is not a regular file", path)
	}
	file, err := os.Open(path)
	if err != nil {
		return nil, problem(KeyFile, "%v", err)
	}
	defer file.Close()
	if err := checkKeyFile(file); err != nil {
		return nil, problem(KeyFile, "%s: %v", path, err)
	}
	content, err := io.ReadAll(io.LimitReader(file, mostKeyFile+1))
	if err != nil {
		return nil, problem(KeyFile, "%v", err)
	}
	return content, nil
}

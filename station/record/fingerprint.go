package record

import (
	"crypto/sha256"
	"encoding/base32"
	"encoding/hex"
	"fmt"
	"strings"
)

func hashOf(data []byte) string {
	sum := sha256.Sum256(data)
	return hex.EncodeToString(sum[:])
}

// Fingerprint is the code a certificate carries: the first 80 bits of the SHA-256 of the
// attempt's content as JSON, in groups of four characters of base 32. It changes with any
// number, name, time or file of the attempt, and can be worked out again from the store.
func Fingerprint(a *Attempt) string {
	data, err := wholeOf(a)
	if err != nil {
		panic(fmt.Sprintf("record: an attempt cannot be written as JSON: %v", err)) // readings are checked to be finite
	}
	sum := sha256.Sum256([]byte(data))
	text := base32.StdEncoding.EncodeToString(sum[:10])
	var groups []string
	for i := 0; i < len(text); i += 4 {
		groups = append(groups, text[i:i+4])
	}
	return strings.Join(groups, "-")
}

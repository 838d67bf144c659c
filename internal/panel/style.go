package panel

import (
	"crypto/sha256"
	"encoding/base64"
	"strings"
)

// styleHash lets the one style block through the content security policy.
var styleHash = func() string {
	_, rest, _ := strings.Cut(pageHTML, "<style>")
	css, _, _ := strings.Cut(rest, "</style>")
	sum := sha256.Sum256([]byte(css))
	return base64.StdEncoding.EncodeToString(sum[:])
}()

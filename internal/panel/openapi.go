package panel

import (
	_ "embed"
	"net/http"
)

//go:embed openapi.json
var openAPIText []byte

// openAPI serves the description of the API, OpenAPI 3.1.
func openAPI(w http.ResponseWriter, r *http.Request) {
	w.Header().Set("Content-Type", "application/json")
	_, _ = w.Write(openAPIText)
}

package sheet

import (
	"net/http"
	"strings"

	"limitary/internal/sheet/kit"
)

// kitPath is where the kit lies under /sheet/.
const kitPath = "kit"

// Open reports a request that needs no key: the files of the kit hold no secret and nothing of any laboratory.
func Open(r *http.Request) bool {
	rest, ok := strings.CutPrefix(r.URL.Path, "/sheet/"+kitPath)
	return ok && (rest == "" || rest[0] == '/') && (r.Method == http.MethodGet || r.Method == http.MethodHead)
}

// kit answers with a file of the kit for the address that was asked, or with the listing.
func (h *Handler) kit(r *request) (*answer, error) {
	name := ""
	if len(r.args) > 0 {
		name = r.args[0]
	}
	f, ok := kit.Find(name)
	if !ok {
		return nil, &refusal{status: http.StatusNotFound, text: clip(name) + ": is no file of the kit; /sheet/kit/ lists them"}
	}
	body, err := f.Bytes(h.scheme + "://" + r.http.Host)
	if err != nil {
		return nil, err
	}
	a := &answer{contentType: f.ContentType, body: body}
	if f.Name != kit.IndexName {
		a.filename = f.Name
	}
	return a, nil
}

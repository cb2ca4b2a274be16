// Package api holds the generated contract: the Go code of package limitary.v1 below it, and the OpenAPI document of its
// REST face. Only this file is written by hand.
package api

import _ "embed"

// OpenAPI is the OpenAPI 2.0 document of the REST face, as JSON.
//
//go:embed openapi.swagger.json
var OpenAPI []byte

package api

import (
	_ "embed"
	"net/http"

	"github.com/gin-gonic/gin"
	"github.com/goccy/go-yaml"
)

// openapiYAML is the description of every route, written by hand.
//
//go:embed openapi.yaml
var openapiYAML []byte

// document is the OpenAPI document in both its spellings.
type document struct{ yaml, json []byte }

func loadDocument() (document, error) {
	j, err := yaml.YAMLToJSON(openapiYAML)
	return document{openapiYAML, j}, err
}

// text is a body that is ready as it is.
type text struct {
	contentType string
	bytes       []byte
}

func (t text) send(c *gin.Context, status int) error {
	c.Header("Cache-Control", "no-cache")
	return sendBytes(c, status, t.contentType, t.bytes)
}

func (a *API) documentJSON(*gin.Context) (int, any, error) {
	return http.StatusOK, text{"application/json", a.document.json}, nil
}

func (a *API) documentYAML(*gin.Context) (int, any, error) {
	return http.StatusOK, text{"application/yaml", a.document.yaml}, nil
}

package server

import (
	_ "embed"
	"encoding/json"
	"fmt"
	"maps"
	"net/http"
	"slices"
	"strings"

	"github.com/labstack/echo/v4"
)

// apiDocument describes what is meant for programs, as OpenAPI 3.1. A test holds it against the route table and against
// answers as they are given.
//
//go:embed api.json
var apiDocument []byte

// apiPage is the same for people.
type apiPage struct {
	Frame
	Heading, Lead string
	Calls         []apiCall
}

type apiCall struct {
	Method, Path, Summary, Text, Needs, Answer string
	Takes                                      []fact
}

// api is the part of the document the page shows.
type api struct {
	Info  struct{ Title, Description string }
	Paths map[string]map[string]apiOperation
}

type apiOperation struct {
	Summary, Description string
	Parameters           []struct {
		Name, Description string
		Required          bool
	}
	RequestBody *struct{ Content map[string]apiContent }
	Responses   map[string]struct {
		Description string
		Content     map[string]apiContent
	}
	Security []map[string][]string
}

type apiContent struct {
	Schema struct {
		Ref string `json:"$ref"`
	}
}

// apiShow gives the document, to a browser as a page.
func (s *Server) apiShow(c echo.Context) error {
	if !wantsPage(c.Request()) {
		return sendPacked(c, http.StatusOK, "application/json", apiDocument)
	}
	var doc api
	if err := json.Unmarshal(apiDocument, &doc); err != nil {
		return fmt.Errorf("document of the exchange: %w", err)
	}
	view := apiPage{Frame: s.frame(c, doc.Info.Title, ""), Heading: doc.Info.Title, Lead: doc.Info.Description}
	for _, path := range slices.Sorted(maps.Keys(doc.Paths)) {
		for _, method := range slices.Sorted(maps.Keys(doc.Paths[path])) {
			view.Calls = append(view.Calls, s.apiCall(method, path, doc.Paths[path][method]))
		}
	}
	return s.page(c, http.StatusOK, "api.html", view)
}

func (s *Server) apiCall(method, path string, op apiOperation) apiCall {
	k := s.ink()
	call := apiCall{Method: strings.ToUpper(method), Path: path, Summary: op.Summary, Text: op.Description, Answer: op.Responses["200"].Description, Needs: k.say("api.needs_none")}
	for _, scheme := range op.Security {
		for name := range scheme {
			call.Needs = k.say("api.needs_" + name)
		}
	}
	for _, p := range op.Parameters {
		name := p.Name
		if !p.Required {
			name = k.say("api.may", "name", p.Name)
		}
		call.Takes = append(call.Takes, fact{Name: name, Value: p.Description})
	}
	if op.RequestBody != nil {
		call.Takes = append(call.Takes, fact{Name: k.say("api.body"), Value: schemaName(op.RequestBody.Content)})
	}
	call.Takes = append(call.Takes, fact{Name: k.say("api.answer"), Value: schemaName(op.Responses["200"].Content)})
	return call
}

// schemaName says the form of a body: a schema of the document, else its media type.
func schemaName(content map[string]apiContent) string {
	for kind, c := range content {
		if name := strings.TrimPrefix(c.Schema.Ref, "#/components/schemas/"); name != "" {
			return name
		}
		return kind
	}
	return ""
}

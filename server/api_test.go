package server

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"image"
	"image/jpeg"
	"net/http"
	"regexp"
	"strings"
	"testing"

	"github.com/santhosh-tekuri/jsonschema/v6"
)

// recorded is a real request and its answer, by the operation they belong to.
type recorded struct {
	method, path string
	request      []byte
	answer       answer
}

// apiOf reads the document and compiles its schemas (JSON Schema 2020-12, which OpenAPI 3.1 uses).
func apiOf(t *testing.T) (doc map[string]any, schema func(pointer string) *jsonschema.Schema) {
	t.Helper()
	v, err := jsonschema.UnmarshalJSON(bytes.NewReader(apiDocument))
	must(t, err)
	c := jsonschema.NewCompiler()
	c.AssertFormat()
	must(t, c.AddResource("api.json", v))
	return v.(map[string]any), func(pointer string) *jsonschema.Schema {
		s, err := c.Compile("api.json#" + pointer)
		must(t, err)
		return s
	}
}

// Every call of the exchange is described, and nothing that is not there.
func TestAPI_DescribesTheRoutesThatAre(t *testing.T) {
	doc, _ := apiOf(t)
	if v, _ := doc["openapi"].(string); !strings.HasPrefix(v, "3.1.") {
		t.Errorf("got version %q, want OpenAPI 3.1", v)
	}
	described := map[string]bool{}
	for path, item := range doc["paths"].(map[string]any) {
		for method := range item.(map[string]any) {
			described[strings.ToUpper(method)+" "+path] = true
		}
	}
	param := regexp.MustCompile(`:(\w+)`)
	for _, r := range publicRoutes() {
		key := r.method + " " + param.ReplaceAllString(r.path, "{$1}")
		if machine := strings.HasPrefix(r.path, "/exchange/") || strings.HasPrefix(r.path, "/calendar/"); machine && !described[key] {
			t.Errorf("%s is not described", key)
		}
		delete(described, key)
	}
	for key := range described {
		t.Errorf("%s is described and there is no such route", key)
	}
}

// Requests and answers as they really are, held against the schemas; every operation with JSON is among them.
func TestAPI_AnswersAreOfTheirSchemas(t *testing.T) {
	doc, schema := apiOf(t)
	seen := map[string]bool{}
	for _, got := range recordedExchange(t) {
		operation := doc["paths"].(map[string]any)[got.path].(map[string]any)[strings.ToLower(got.method)].(map[string]any)
		at := "/paths/" + strings.ReplaceAll(got.path, "/", "~1") + "/" + strings.ToLower(got.method)
		status := "200"
		if got.answer.status != 200 {
			status = "default"
		}
		if strings.HasPrefix(got.answer.header.Get("Content-Type"), "application/json") {
			pointer := at + "/responses/200/content/application~1json/schema"
			if status == "default" {
				pointer = "/components/schemas/Error"
			}
			v, err := jsonschema.UnmarshalJSON(strings.NewReader(got.answer.body))
			must(t, err)
			if err := schema(pointer).Validate(v); err != nil {
				t.Errorf("%s %s answered %d: %v\n%.400s", got.method, got.path, got.answer.status, err, got.answer.body)
			}
		}
		if body, ok := operation["requestBody"].(map[string]any); ok && status == "200" {
			if _, isJSON := body["content"].(map[string]any)["application/json"]; isJSON {
				v, err := jsonschema.UnmarshalJSON(bytes.NewReader(got.request))
				must(t, err)
				if err := schema(at + "/requestBody/content/application~1json/schema").Validate(v); err != nil {
					t.Errorf("%s %s asked: %v", got.method, got.path, err)
				}
			}
		}
		if status == "200" {
			seen[got.method+" "+got.path] = true
		}
	}
	for path, item := range doc["paths"].(map[string]any) {
		for method := range item.(map[string]any) {
			if key := strings.ToUpper(method) + " " + path; !seen[key] && path != "/calendar/{token}" && path != "/exchange/renew" {
				t.Errorf("%s is in no record: its schema is held against nothing", key)
			}
		}
	}
	v, err := jsonschema.UnmarshalJSON(strings.NewReader(`{"receipts":[{"id":"x","state":"lost","store":"a","epoch":1}],"now":"2026-12-01T07:52:00.000Z"}`))
	must(t, err)
	if schema("/components/schemas/Receipts").Validate(v) == nil {
		t.Error("a receipt of an unknown state fits: the schemas hold nothing back")
	}
}

// recordedExchange goes through the exchange as a phone does, with some requests that are refused.
func recordedExchange(t *testing.T) (out []recorded) {
	t.Helper()
	r := newRig(t, 2)
	var photo bytes.Buffer
	must(t, jpeg.Encode(&photo, image.NewGray(image.Rect(0, 0, 40, 30)), nil))
	sum := sha256.Sum256(photo.Bytes())
	name := hex.EncodeToString(sum[:])
	h := r.enrol(r.crew)
	entry := h.entry(r.devices[0], 4.5)
	entry.Body.(set)["photos"] = []string{name}

	enrol := []byte(`{"installation":"` + newID() + `"}`)
	req, err := http.NewRequest(http.MethodPost, r.url+"/exchange/enrol", bytes.NewReader(enrol))
	must(t, err)
	req.Header.Set("Sec-Fetch-Site", "same-origin")
	out = append(out, recorded{"POST", "/exchange/enrol", enrol, r.do(r.signIn(r.crew), req)})

	send := func(path, query string, body []byte) answer {
		got := h.send(path+query, body)
		out = append(out, recorded{"POST", path, body, got})
		return got
	}
	fetch := func(path, query string) answer {
		got := h.fetch(path + query)
		out = append(out, recorded{"GET", path, nil, got})
		return got
	}
	send("/exchange/push", "", pushBody(t, entry.bytes(t), `{"damaged`))
	send("/exchange/push", "", pushBody(t, entry.bytes(t)))
	send("/exchange/push", "", []byte(`{"protocol":99,"sent":"","records":[]}`))
	send("/exchange/photo", "?entry="+entry.ID+"&sha256="+name, photo.Bytes())
	send("/exchange/ask", "", []byte(`{"ids":["`+entry.ID+`"]}`))
	send("/exchange/renew", "", enrol)
	fetch("/exchange/people", "")
	fetch("/exchange/entry", "?id="+entry.ID)
	fetch("/exchange/snapshot", "?log="+r.site)
	fetch("/exchange/pull", "?log="+r.site)
	fetch("/exchange/pull", "?log=")
	fetch("/exchange/head", "?log="+r.site+"&from=1&own=2")
	var logs logsAnswer
	must(t, json.Unmarshal([]byte(fetch("/exchange/logs", "").body), &logs))
	for _, l := range logs.Logs {
		if l.Log == r.site {
			body, err := json.Marshal(headDoubted{Log: l.Log, Size: l.Size, Root: l.Root})
			must(t, err)
			send("/exchange/head", "", body)
		}
	}
	return out
}

func TestAPI_IsReadByProgramsAndPeople(t *testing.T) {
	r := newRig(t, 0)
	req, err := http.NewRequest(http.MethodGet, r.url+"/api", nil)
	must(t, err)
	if got := r.do(browser(t), req); got.status != 200 || got.body != string(apiDocument) {
		t.Errorf("a program got %d, %d bytes", got.status, len(got.body))
	}
	page := r.open(browser(t), "/api")
	for _, want := range []string{"POST /exchange/push", "GET /exchange/snapshot", "bearer token"} {
		if !strings.Contains(page.body, want) {
			t.Errorf("the page lacks %q", want)
		}
	}
}

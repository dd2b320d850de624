package server

import (
	"net/http"

	"github.com/labstack/echo/v4"
)

// route is one row of a table: how it is asked, who may ask, and who answers. body is the largest request body in bytes,
// 0 = the limit of an ordinary form.
type route struct {
	method, path string
	who          who
	handle       func(*Server, echo.Context) error
	body         int64
}

const (
	get  = http.MethodGet
	post = http.MethodPost
)

const (
	formLimit   = 256 << 10
	pushLimit   = 512 << 10
	importLimit = 64 << 20
)

// publicRoutes is everything the public face answers.
func publicRoutes() []route {
	return []route{
		// access
		{get, "/in", anyone, (*Server).linkAsk, 0},
		{post, "/in", anyone, (*Server).linkPasted, 0},
		{get, "/in/:token", anyone, (*Server).linkShow, 0},
		{post, "/in/:token", anyone, (*Server).linkSpend, 0},
		{post, "/out", anyone, (*Server).sessionEnd, 0},
		{get, "/assets/*", anyone, (*Server).assetShow, 0},
		{get, "/t/:tag", anyone, (*Server).tagOpen, 0},
		{get, "/T/:tag", anyone, (*Server).tagOpen, 0},

		// field client
		{get, "/field", anyone, (*Server).fieldShow, 0},
		{get, "/field/*", anyone, (*Server).fieldShow, 0},

		// exchange
		{post, "/exchange/enrol", crew | manager, (*Server).exchangeEnrol, 0},
		{post, "/exchange/push", phone, (*Server).exchangePush, pushLimit},
		{get, "/exchange/pull", phone, (*Server).exchangePull, 0},
		{post, "/exchange/ask", phone, (*Server).exchangeAsk, 0},
		{get, "/exchange/logs", phone, (*Server).exchangeLogs, 0},
		{get, "/exchange/people", phone, (*Server).exchangePeople, 0},
		{get, "/exchange/snapshot", phone, (*Server).exchangeSnapshot, 0},

		// office
	}
}

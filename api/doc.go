// Package api is the HTTP edge: the route table, who may do what, how bodies are read, how answers and problems are
// written. Handlers are by hand and held to openapi.yaml by tests; nothing here knows SQL.
//
// A handler is a func(*call) (reply, error). It never writes to the connection and never chooses the status of a
// failure: one wrapper (Server.serve) does both, for every route alike.
package api

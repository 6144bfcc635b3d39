// Package client is the Go client of a wideberth service.
package client

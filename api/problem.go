package api

import (
	"errors"
	"net/http"
	"strings"

	"evenshelf/store"
)

// problem is an error as a client sees it: an RFC 9457 problem document. Detail and Errors are words for a
// person and hold nothing that only the log should know.
type problem struct {
	Type   string      `json:"type"` // stable; programs tell problems apart by it
	Title  string      `json:"title"`
	Status int         `json:"status"`
	Detail string      `json:"detail,omitempty"`
	Errors []complaint `json:"errors,omitempty"`
}

// complaint names one thing wrong with the input.
type complaint struct {
	Field  string `json:"field"`
	Reason string `json:"reason"`
}

func (p *problem) Error() string {
	return strings.TrimSuffix(p.Title+": "+p.Detail, ": ")
}

// kind is what all problems of one type have in common.
type kind struct {
	name, title string
	status      int
}

// The kinds of problem. openapi.yaml lists the same names.
var (
	kindBadRequest  = kind{"bad-request", "The request cannot be read", http.StatusBadRequest}
	kindCrossOrigin = kind{"cross-origin", "Another site asked for a change", http.StatusForbidden}
	kindReadOnly    = kind{"read-only", "This shelf takes no new files", http.StatusForbidden}
	kindNotFound    = kind{"not-found", "Not found", http.StatusNotFound}
	kindMethod      = kind{"method-not-allowed", "Method not allowed", http.StatusMethodNotAllowed}
	kindExists      = kind{"exists", "Already exists", http.StatusConflict}
	kindState       = kind{"state", "Not possible in this state", http.StatusConflict}
	kindTooLarge    = kind{"too-large", "Too large", http.StatusRequestEntityTooLarge}
	kindMediaType   = kind{"media-type", "Unsupported media type", http.StatusUnsupportedMediaType}
	kindHost        = kind{"host", "Not addressed to this service", http.StatusMisdirectedRequest}
	kindInvalid     = kind{"invalid", "Some of the input is not valid", http.StatusUnprocessableEntity}
	kindInternal    = kind{"internal", "Internal error", http.StatusInternalServerError}
	kindUnavailable = kind{"unavailable", "Not available just now", http.StatusServiceUnavailable}
)

// with makes a problem. Without a detail of its own it says the complaints, for clients that show no more.
func (k kind) with(detail string, errs ...complaint) *problem {
	if detail == "" {
		words := make([]string, len(errs))
		for i, e := range errs {
			words[i] = e.Field + ": " + e.Reason
		}
		detail = strings.Join(words, "; ")
	}
	return &problem{Type: "/problems/" + k.name, Title: k.title, Status: k.status, Detail: detail, Errors: errs}
}

func badRequest(detail string, errs ...complaint) *problem {
	return kindBadRequest.with(detail, errs...)
}
func notFound(detail string) *problem    { return kindNotFound.with(detail) }
func invalid(errs ...complaint) *problem { return kindInvalid.with("", errs...) }
func unavailable(detail string) *problem { return kindUnavailable.with(detail) }

// problemOf turns any error into the problem a client may see. The store wraps its own errors with words
// meant for people ("run 7: not found"), so those go out; anything else is internal and says nothing.
func problemOf(err error) *problem {
	var p *problem
	var tooLarge *http.MaxBytesError
	switch {
	case errors.As(err, &p):
		return p
	case errors.As(err, &tooLarge):
		return kindTooLarge.with("the request is larger than " + bytesInWords(tooLarge.Limit))
	}
	for _, known := range []struct {
		sentinel error
		kind     kind
	}{
		{store.ErrNotFound, kindNotFound}, {store.ErrExists, kindExists}, {store.ErrState, kindState}, {store.ErrInvalid, kindInvalid},
	} {
		if errors.Is(err, known.sentinel) { // the title says it already
			return known.kind.with(strings.TrimSuffix(err.Error(), ": "+known.sentinel.Error()))
		}
	}
	return kindInternal.with("")
}

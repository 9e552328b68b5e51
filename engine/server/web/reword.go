package web

import (
	"mime"
	"net/http"
	"regexp"
	"strings"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// unknownField is how the library says that a message has no such field.
var unknownField = regexp.MustCompile(`unknown field "?([^"\s]+)"?`)

// saidMost bounds the library's words.
const saidMost = 500

// reworded is what is wrong with a request that could not be read as a message,
// and what to do. said is in the library's words, which begin with what it was
// doing and by what package.
func reworded(said string) *status.Status {
	if len(said) > saidMost { // it quotes the request
		said = strings.ToValidUTF8(said[:saidMost], "") + "…"
	}
	what, isBody := strings.CutPrefix(said, "unmarshal message: ")
	what = strings.TrimPrefix(what, "proto: ")
	if m := unknownField.FindStringSubmatch(what); m != nil {
		return because(status.Newf(codes.InvalidArgument, "the request: %s: give fields as the .proto files name them", what),
			leadlinev1.Reason_REASON_BAD_FIELD, "field", m[1])
	}
	if !isBody {
		return because(status.New(codes.InvalidArgument, said), leadlinev1.Reason_REASON_BAD_FIELD)
	}
	return because(status.Newf(codes.InvalidArgument, "the request is no message of this call: %s: send one whole JSON object with fields as the .proto files have them", what),
		leadlinev1.Reason_REASON_BAD_FIELD)
}

// contentTypes are what the body of a call may be.
var contentTypes = map[string]bool{
	"application/json": true, "application/proto": true,
	"application/connect+json": true, "application/connect+proto": true,
	"application/grpc-web": true, "application/grpc-web+json": true, "application/grpc-web+proto": true,
	"application/grpc-web-text": true, "application/grpc-web-text+proto": true,
	"application/grpc": true, "application/grpc+json": true, "application/grpc+proto": true,
}

// unreadable refuses a call whose body is of a type that is none of a call's,
// which the library answers with nothing but 415.
func (s *Server) unreadable(w http.ResponseWriter, r *http.Request) bool {
	if r.Method != http.MethodPost || !strings.HasPrefix(r.URL.Path, "/"+leadlinev1.PositionService_ServiceDesc.ServiceName+"/") {
		return false
	}
	given := r.Header.Get("Content-Type")
	if kind, _, err := mime.ParseMediaType(given); err == nil && contentTypes[kind] {
		return false
	}
	as := r.Clone(r.Context())
	as.Header.Set("Content-Type", "application/json") // how it is answered
	w.Header().Set("Accept-Post", "application/json")
	s.refuse(&coded{w, http.StatusUnsupportedMediaType}, as, because(
		status.Newf(codes.InvalidArgument, "the Content-Type is %.80q: say application/json and send JSON", given),
		leadlinev1.Reason_REASON_WRONG_MESSAGE))
	return true
}

// coded answers with a status of its own.
type coded struct {
	http.ResponseWriter
	code int
}

func (c *coded) WriteHeader(int) { c.ResponseWriter.WriteHeader(c.code) }

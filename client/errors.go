package client

import (
	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/status"
)

// ReasonOf reads the stable reason and what the service says about it from an
// error of a call, e.g. the head after a stale base. Both are empty when err
// carries none: it did not come from the service, or from one behind a proxy
// that answered itself. status.Code(err) gives the code.
func ReasonOf(err error) (reason string, metadata map[string]string) {
	st, ok := status.FromError(err)
	if !ok {
		return "", nil
	}
	for _, d := range st.Details() {
		if info, is := d.(*errdetails.ErrorInfo); is {
			return info.GetReason(), info.GetMetadata()
		}
	}
	return "", nil
}

// FieldProblem is one field of a request that the service did not accept.
type FieldProblem struct {
	Field   string // its path, in the contract's words
	Problem string // value and wanted range
}

// FieldProblems reads from an error which fields of the request were not accepted.
// Long lists are cut by the service.
func FieldProblems(err error) []FieldProblem {
	st, ok := status.FromError(err)
	if !ok {
		return nil
	}
	var out []FieldProblem
	for _, d := range st.Details() {
		if bad, is := d.(*errdetails.BadRequest); is {
			for _, v := range bad.GetFieldViolations() {
				out = append(out, FieldProblem{Field: v.GetField(), Problem: v.GetDescription()})
			}
		}
	}
	return out
}

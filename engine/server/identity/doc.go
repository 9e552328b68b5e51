// Package identity says who calls: a client certificate or a bearer token
// becomes a Caller with a name and roles. It knows no calls and no vehicles'
// data; what a role may do, engine/server says.
//
// Certificates, the authority for those of clients, and key sets may be
// replaced in their files while the server runs. A file that does not read is
// reported, and what was there before goes on.
package identity

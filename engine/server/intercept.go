package server

import (
	"context"

	"google.golang.org/grpc"
	"google.golang.org/grpc/metadata"

	leadlinev1 "leadline/proto/leadline/v1"
)

// versionHeader names the server's version in the header of every answer.
const versionHeader = "leadline-version"

func (s *Server) header() metadata.MD { return metadata.Pairs(versionHeader, s.cfg.Version) }

// aroundUnary and aroundStream run around every call.
func (s *Server) aroundUnary(ctx context.Context, req any, info *grpc.UnaryServerInfo, handle grpc.UnaryHandler) (any, error) {
	if err := grpc.SetHeader(ctx, s.header()); err != nil {
		return nil, err
	}
	return s.guardUnary(ctx, req, info.FullMethod, s.routed(info.FullMethod, handle))
}

func (s *Server) aroundStream(srv any, stream grpc.ServerStream, info *grpc.StreamServerInfo, handle grpc.StreamHandler) error {
	// At once: it may be long until a stream has something to say.
	if err := stream.SendHeader(s.header()); err != nil {
		return err
	}
	return s.guardStream(srv, stream, info.FullMethod, handle)
}

// unknown answers calls that the server does not know.
func (s *Server) unknown(_ any, stream grpc.ServerStream) error {
	method, _ := grpc.MethodFromServerStream(stream)
	return refuse(leadlinev1.Reason_REASON_NOT_OFFERED, about{"method": method}, "there is no call %s here: see the server's version in the header %s", clip(method), versionHeader)
}

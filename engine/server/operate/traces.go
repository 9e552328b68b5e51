package operate

import (
	"context"
	"errors"
	"fmt"
	"net/url"

	"go.opentelemetry.io/contrib/instrumentation/google.golang.org/grpc/otelgrpc"
	"go.opentelemetry.io/otel/attribute"
	"go.opentelemetry.io/otel/exporters/otlp/otlptrace/otlptracegrpc"
	"go.opentelemetry.io/otel/propagation"
	"go.opentelemetry.io/otel/sdk/resource"
	sdktrace "go.opentelemetry.io/otel/sdk/trace"
	"google.golang.org/grpc/stats"
)

// Traces sends a share of the calls over gRPC to a collector.
type Traces struct {
	provider *sdktrace.TracerProvider
}

// NewTraces sends traces to a collector by OTLP over gRPC: endpoint is
// http://HOST:PORT for plain text, https:// for TLS. A call that comes with a
// trace is part of it if that is kept; of the others, a share is.
func NewTraces(ctx context.Context, endpoint, version string, share float64) (*Traces, error) {
	u, err := url.Parse(endpoint)
	if err != nil || u.Host == "" || u.Scheme != "http" && u.Scheme != "https" {
		return nil, fmt.Errorf("operate: traces to %.200q: give http://HOST:PORT, or https:// for TLS", endpoint)
	}
	if !(share >= 0 && share <= 1) {
		return nil, errors.New("operate: the share of calls that are traced must be from 0 to 1")
	}
	exporter, err := otlptracegrpc.New(ctx, otlptracegrpc.WithEndpointURL(endpoint))
	if err != nil {
		return nil, fmt.Errorf("operate: traces to %s: %w", endpoint, err)
	}
	return &Traces{sdktrace.NewTracerProvider(
		sdktrace.WithBatcher(exporter),
		sdktrace.WithSampler(sdktrace.ParentBased(sdktrace.TraceIDRatioBased(share))),
		sdktrace.WithResource(resource.NewSchemaless(attribute.String("service.name", "leadline"), attribute.String("service.version", version))),
	)}, nil
}

// Handler traces the calls of a grpc.Server.
func (t *Traces) Handler() stats.Handler {
	return otelgrpc.NewServerHandler(otelgrpc.WithTracerProvider(t.provider), otelgrpc.WithPropagators(propagation.TraceContext{}))
}

// Close sends what waits, until ctx is done.
func (t *Traces) Close(ctx context.Context) error { return t.provider.Shutdown(ctx) }

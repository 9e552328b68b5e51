package server

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net/http"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"connectrpc.com/connect/v2"
	"connectrpc.com/connect/v2/connecthttp"
	"connectrpc.com/connect/v2/connectproto"
	spb "google.golang.org/genproto/googleapis/rpc/status"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/reflect/protoreflect"
	"google.golang.org/protobuf/reflect/protoregistry"

	"leadline/engine/client"
	"leadline/engine/server/identity"
	"leadline/fixtures/credentials"
	leadlinev1 "leadline/proto/leadline/v1"
)

// permitted is the table of docs/server.md of who may do what: for each call, a word for
// each role.
func permitted(t *testing.T) map[string]map[identity.Role]string {
	t.Helper()
	text, err := os.ReadFile("../../docs/server.md")
	if err != nil {
		t.Fatal(err)
	}
	_, chapter, ok := strings.Cut(string(text), "\n## Who may do what\n")
	if !ok {
		t.Fatal("docs/server.md has no chapter on who may do what")
	}
	chapter, _, _ = strings.Cut(chapter, "\n## ")
	var head []string
	out := map[string]map[identity.Role]string{}
	for line := range strings.Lines(chapter) {
		if !strings.HasPrefix(line, "| ") {
			continue
		}
		cells := strings.Split(strings.ReplaceAll(strings.Trim(strings.TrimSpace(line), "| "), "`", ""), " | ")
		if head == nil {
			head = cells
			continue
		}
		row := map[identity.Role]string{}
		for i, c := range cells[1:] {
			row[identity.Role(head[i+1])] = c
		}
		out[cells[0]] = row
	}
	return out
}

// guardedCall is one call of the API as it is tried.
type guardedCall struct {
	method protoreflect.MethodDescriptor
	about  []string // vehicles that it is for; none is for all, where that can be
}

func (c guardedCall) path() string {
	return fmt.Sprintf("/%s/%s", c.method.Parent().FullName(), c.method.Name())
}

// request makes a request by the names of its fields: whichever way a message
// names vehicles, the call is for those.
func (c guardedCall) request(t *testing.T) proto.Message {
	t.Helper()
	kind, err := protoregistry.GlobalTypes.FindMessageByName(c.method.Input().FullName())
	if err != nil {
		t.Fatal(err)
	}
	m := kind.New()
	switch fields := m.Descriptor().Fields(); {
	case m.Descriptor().FullName() == "leadline.v1.FeedRequest":
		return opening(&leadlinev1.Open{Header: header(strings.Join(c.about, "")), Drive: "d"})
	case fields.ByName("vehicle") != nil:
		m.Set(fields.ByName("vehicle"), protoreflect.ValueOfString(strings.Join(c.about, "")))
	case fields.ByName("vehicles") != nil:
		list := m.Mutable(fields.ByName("vehicles")).List()
		for _, v := range c.about {
			list.Append(protoreflect.ValueOfString(v))
		}
	}
	return m.Interface()
}

// namesVehicles reports whether a call is for vehicles that it names.
func namesVehicles(m protoreflect.MethodDescriptor) (names, several bool) {
	f := m.Input().Fields()
	return m.Input().FullName() == "leadline.v1.FeedRequest" || f.ByName("vehicle") != nil || f.ByName("vehicles") != nil, f.ByName("vehicles") != nil
}

// byGRPC makes the call over gRPC and returns its first answer's error.
func (c guardedCall) byGRPC(t *testing.T, conn *grpc.ClientConn, token string) error {
	t.Helper()
	ctx, cancel := context.WithCancel(limited(t))
	defer cancel()
	if token != "" {
		ctx = metadata.AppendToOutgoingContext(ctx, "authorization", "Bearer "+token)
	}
	st, err := conn.NewStream(ctx, &grpc.StreamDesc{ServerStreams: true, ClientStreams: true}, c.path())
	if err != nil {
		return err
	}
	_ = st.SendMsg(c.request(t)) // an error of it comes from receiving
	if !c.method.IsStreamingServer() || c.method.Name() != "Feed" {
		_ = st.CloseSend()
	}
	return st.RecvMsg(c.answer(t))
}

func (c guardedCall) answer(t *testing.T) proto.Message {
	t.Helper()
	kind, err := protoregistry.GlobalTypes.FindMessageByName(c.method.Output().FullName())
	if err != nil {
		t.Fatal(err)
	}
	return kind.New().Interface()
}

// byHTTP makes the call by Connect in JSON.
func (c guardedCall) byHTTP(t *testing.T, conn *grpc.ClientConn, token string) error {
	t.Helper()
	ctx, cancel := context.WithCancel(limited(t))
	defer cancel()
	keeps := &http.Transport{DisableKeepAlives: true}
	cl := connect.NewClient(connecthttp.NewTransport(&http.Client{Transport: bearer{keeps, token}}, "http://"+conn.Target(), connecthttp.WithProtoJSON()))
	if !c.method.IsStreamingServer() {
		return asStatus(cl.CallUnary(ctx, connect.Spec{Procedure: c.path()}, c.request(t), c.answer(t)))
	}
	st, err := cl.CallServerStream(ctx, connect.Spec{StreamType: connect.StreamTypeServer, Procedure: c.path()}, c.request(t))
	if err != nil {
		return asStatus(err)
	}
	err = st.Receive(c.answer(t))
	cancel()
	_ = st.Close()
	return asStatus(err)
}

// bearer shows a token with each request.
type bearer struct {
	http.RoundTripper
	token string
}

func (b bearer) RoundTrip(r *http.Request) (*http.Response, error) {
	if b.token != "" {
		r = r.Clone(r.Context())
		r.Header.Set("Authorization", "Bearer "+b.token)
	}
	return b.RoundTripper.RoundTrip(r)
}

// asStatus makes gRPC's error of Connect's.
func asStatus(err error) error {
	if err == nil {
		return nil
	}
	var ce *connect.Error
	if !errors.As(err, &ce) {
		return err
	}
	st := &spb.Status{Code: int32(ce.Code()), Message: ce.Message()}
	for _, d := range ce.Details() {
		st.Details = append(st.Details, connectproto.ErrorDetailToAny(d))
	}
	return status.ErrorProto(st)
}

// maker makes a token for a name, with changed claims.
type maker func(name string, change ...any) string

// byToken is access by tokens, and who issues those.
func byToken(t *testing.T) (*Access, maker) {
	t.Helper()
	issuer := credentials.NewIssuer(t, "k")
	keys := filepath.Join(t.TempDir(), "keys.json")
	if err := os.WriteFile(keys, issuer.Keys(t), 0o600); err != nil {
		t.Fatal(err)
	}
	tokens, err := identity.NewTokens(identity.TokenConfig{Issuer: "https://issuer.example", Audience: "leadline", Keys: keys})
	if err != nil {
		t.Fatal(err)
	}
	return &Access{Tokens: tokens}, func(name string, change ...any) string {
		claims := map[string]any{"iss": "https://issuer.example", "aud": "leadline", "sub": name, "exp": time.Now().Add(time.Hour).Unix()}
		for i := 0; i < len(change); i += 2 {
			claims[change[i].(string)] = change[i+1]
		}
		return issuer.Token(t, claims)
	}
}

// showing is a context whose calls show a token.
func showing(t *testing.T, token string) context.Context {
	return metadata.AppendToOutgoingContext(limited(t), "authorization", "Bearer "+token)
}

// tokenServer is a server that knows callers by tokens.
func tokenServer(t *testing.T, cfg Config) (conn *grpc.ClientConn, token maker) {
	t.Helper()
	cfg.Access, token = byToken(t)
	_, conn = serve(t, cfg)
	return conn, token
}

// TestAuthorization tries every call of the API's services in every role, for
// the caller's own vehicle, for another and for all, over gRPC and by JSON over
// HTTP, and compares with the table of docs/server.md; and each with no token, one that
// has expired and one of another issuer. A call that is new has no row there, and
// fails.
func TestAuthorization(t *testing.T) {
	table := permitted(t)
	conn, token := tokenServer(t, Config{NewSession: newTally})
	for _, v := range []string{"own", "other"} { // so that what is allowed has an answer
		ctx := showing(t, token(v, "roles", "vehicle"))
		if _, err := fed(ctx, conn, client.Drive{Header: header(v), Name: "d"}, voyage(1, 2)); err != nil {
			t.Fatal(err)
		}
	}
	identityReasons := []leadlinev1.Reason{
		leadlinev1.Reason_REASON_NO_IDENTITY, leadlinev1.Reason_REASON_BAD_IDENTITY, leadlinev1.Reason_REASON_IDENTITY_EXPIRED,
		leadlinev1.Reason_REASON_IDENTITY_UNCHECKED, leadlinev1.Reason_REASON_NOT_ALLOWED,
	}
	tried, methods := 0, 0
	try := func(c guardedCall, what, token string, want leadlinev1.Reason) {
		t.Helper()
		ways := map[string]func(*testing.T, *grpc.ClientConn, string) error{"gRPC": c.byGRPC}
		if !c.method.IsStreamingClient() {
			ways["HTTP"] = c.byHTTP
		}
		for way, call := range ways {
			tried++
			got := saidBy(call(t, conn, token))
			if want == leadlinev1.Reason_REASON_UNSPECIFIED {
				if slices.Contains(identityReasons, got.reason) || got.code == codes.Unauthenticated || got.code == codes.PermissionDenied {
					t.Errorf("%s for %v by %s, %s: refused: %+v", c.method.Name(), c.about, way, what, got)
				}
			} else if got.reason != want || got.code != reasonCodes[want] || got.message == "" {
				t.Errorf("%s for %v by %s, %s: %+v, want %v", c.method.Name(), c.about, way, what, got, want)
			}
		}
	}
	services := leadlinev1.File_leadline_v1_service_proto.Services()
	for i := range services.Len() {
		for j := range services.Get(i).Methods().Len() {
			methods++
			m := services.Get(i).Methods().Get(j)
			row, ok := table[string(m.Name())]
			if !ok {
				t.Errorf("%s has no row in the table of docs/server.md of who may do what", m.FullName())
				continue
			}
			delete(table, string(m.Name()))
			cases := []guardedCall{{m, []string{"own"}}}
			names, several := namesVehicles(m)
			if names {
				cases = append(cases, guardedCall{m, []string{"other"}})
			}
			if several {
				cases = append(cases, guardedCall{m, []string{"own", "other"}}, guardedCall{m, nil})
			}
			for _, c := range cases {
				for _, role := range identity.Roles() {
					want := leadlinev1.Reason_REASON_NOT_ALLOWED
					switch word := row[role]; {
					case word == "all", word == "itself" && names && slices.Equal(c.about, []string{"own"}):
						want = leadlinev1.Reason_REASON_UNSPECIFIED
					case word != "–" && word != "itself":
						t.Errorf("%s, %s: %q is no word of the table", m.Name(), role, word)
					}
					what := "as " + string(role)
					try(c, what, token("own", "roles", string(role)), want)
					try(c, what+", expired", token("own", "roles", string(role), "exp", time.Now().Add(-time.Minute).Unix()), leadlinev1.Reason_REASON_IDENTITY_EXPIRED)
					try(c, what+", of another issuer", token("own", "roles", string(role), "iss", "https://other.example"), leadlinev1.Reason_REASON_BAD_IDENTITY)
				}
				try(c, "without a token", "", leadlinev1.Reason_REASON_NO_IDENTITY)
				try(c, "as vehicle and administrator", token("own", "roles", []string{"vehicle", "administrator"}), both(row, names && slices.Equal(c.about, []string{"own"})))
			}
		}
	}
	for name := range table {
		t.Errorf("the table of docs/server.md has a row for %s, which is no call", name)
	}
	if methods < 10 || tried < 30*methods {
		t.Errorf("%d calls of %d methods were tried", tried, methods)
	}
}

// both is what somebody gets who is a vehicle and an administrator.
func both(row map[identity.Role]string, itself bool) leadlinev1.Reason {
	if row[identity.Administrator] == "all" || row[identity.Vehicle] == "all" || row[identity.Vehicle] == "itself" && itself {
		return leadlinev1.Reason_REASON_UNSPECIFIED
	}
	return leadlinev1.Reason_REASON_NOT_ALLOWED
}

// TestAlarmsAreOfAll proves that a vehicle which follows itself is told of no
// other's alarms, and that who has seen one or enters a sighting is noted by the
// name that was shown.
func TestAlarmsAreOfAll(t *testing.T) {
	conn, token := tokenServer(t, Config{NewSession: newTroubled})
	api := leadlinev1.NewPositionServiceClient(conn)
	van, anna := showing(t, token("v", "roles", "vehicle")), showing(t, token("anna", "roles", "dispatcher"))
	st, err := api.Follow(van, &leadlinev1.FollowRequest{Vehicles: []string{"v"}, Alarms: true})
	if err == nil {
		_, err = st.Recv()
	}
	if got := saidBy(err); got.reason != leadlinev1.Reason_REASON_NOT_ALLOWED {
		t.Errorf("a vehicle with alarms: %+v", got)
	}
	st, err = api.Follow(van, &leadlinev1.FollowRequest{Vehicles: []string{"v"}, Roads: true})
	if err == nil {
		_, err = st.Recv()
	}
	if got := saidBy(err); got.reason != leadlinev1.Reason_REASON_NOT_ALLOWED {
		t.Errorf("a vehicle with roads: %+v", got)
	}
	feed, err := client.Open(van, conn, client.Drive{Header: header("v"), Batch: 1})
	if err != nil {
		t.Fatal(err)
	}
	defer feed.Abort()
	sendNumbers(t, feed, 0, 1)
	st, err = api.Follow(anna, &leadlinev1.FollowRequest{Alarms: true})
	if err != nil {
		t.Fatal(err)
	}
	nextAlarms(t, st, 1)
	resp, err := api.AddSighting(anna, &leadlinev1.AddSightingRequest{Vehicle: "v", Sighting: box(0, 200)}) // says that it is Ada's
	if err != nil || resp.GetMeasurement().GetMeasurement().GetSighting().GetWho() != "anna" {
		t.Errorf("a sighting: %v, %v", resp, err)
	}
	alarm, err := api.SeeAlarm(anna, &leadlinev1.SeeAlarmRequest{Number: 1, Who: "Ada"})
	if err != nil || alarm.GetAlarm().GetSeenBy() != "anna" {
		t.Errorf("an alarm: %v, %v", alarm, err)
	}
}

// TestRulesAreComplete proves that every method of every service in the API's
// files has a rule, and that every rule of one's own says whose it is.
func TestRulesAreComplete(t *testing.T) {
	n := 0
	protoregistry.GlobalFiles.RangeFilesByPackage("leadline.v1", func(f protoreflect.FileDescriptor) bool {
		for i := range f.Services().Len() {
			s := f.Services().Get(i)
			for j := range s.Methods().Len() {
				n++
				path := fmt.Sprintf("/%s/%s", s.FullName(), s.Methods().Get(j).Name())
				r, ok := rules[path]
				if !ok {
					t.Errorf("%s has no rule: say in authorize.go who may call it", path)
				}
				if slices.Contains([]scope{r.vehicle, r.dispatcher, r.analyst, r.administrator}, own) && r.vehicles == nil {
					t.Errorf("%s is for one's own vehicle, and does not say which vehicle a message is for", path)
				}
			}
		}
		return true
	})
	if n == 0 || n != len(rules) {
		t.Errorf("%d methods, %d rules", n, len(rules))
	}
}

// TestNothingOfPositions proves that the log of a guarded server holds neither
// tokens nor positions.
func TestNothingOfPositions(t *testing.T) {
	log := &logged{}
	// Lines without their times: seconds such as 53.08 would read as a latitude.
	timeless := func(_ []string, a slog.Attr) slog.Attr {
		if a.Key == slog.TimeKey || a.Key == "drive_time" {
			return slog.Attr{}
		}
		return a
	}
	conn, token := tokenServer(t, Config{Log: slog.New(slog.NewTextHandler(log, &slog.HandlerOptions{ReplaceAttr: timeless}))})
	own := token("v", "roles", "vehicle")
	ctx := showing(t, own)
	if _, err := fed(ctx, conn, client.Drive{Header: header("v")}, voyage(1, 5)); err != nil {
		t.Fatal(err)
	}
	if _, err := leadlinev1.NewPositionServiceClient(conn).Where(ctx, &leadlinev1.WhereRequest{Vehicles: []string{"w"}}); err == nil {
		t.Fatal("asked for another vehicle")
	}
	text := strings.Join(log.lines(), "\n")
	if !strings.Contains(text, "drive ended") || strings.Contains(text, own[:20]) || regexp.MustCompile(`\b(5|53)\.\d{2,}`).MatchString(text) {
		t.Errorf("the log:\n%s", text)
	}
}

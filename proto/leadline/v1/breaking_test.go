package leadlinev1_test

import (
	"fmt"
	"os"
	"slices"
	"strings"
	"testing"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/reflect/protodesc"
	"google.golang.org/protobuf/reflect/protoreflect"
	"google.golang.org/protobuf/reflect/protoregistry"
	"google.golang.org/protobuf/types/descriptorpb"

	_ "leadline/proto/leadline/v1"
)

// baseline is the API as clients out there know it, with what it imports: a
// google.protobuf.FileDescriptorSet. `make generate` sets LEADLINE_REWRITE=added,
// which adds what is new unless something breaks; LEADLINE_REWRITE=1 writes it
// anew, in a commit that breaks the API on purpose and says in its message whom it
// breaks, and why that is right.
const baseline = "testdata/api.binpb"

// present is the API as it is compiled in.
func present() *descriptorpb.FileDescriptorSet {
	set := &descriptorpb.FileDescriptorSet{}
	seen := map[string]bool{}
	var add func(f protoreflect.FileDescriptor)
	add = func(f protoreflect.FileDescriptor) {
		if seen[f.Path()] {
			return
		}
		seen[f.Path()] = true
		for i := range f.Imports().Len() {
			add(f.Imports().Get(i).FileDescriptor) // before those that import it
		}
		set.File = append(set.File, protodesc.ToFileDescriptorProto(f))
	}
	var paths []string
	protoregistry.GlobalFiles.RangeFilesByPackage("leadline.v1", func(f protoreflect.FileDescriptor) bool {
		paths = append(paths, f.Path())
		return true
	})
	slices.Sort(paths)
	for _, p := range paths {
		f, err := protoregistry.GlobalFiles.FindFileByPath(p)
		if err != nil {
			panic(err)
		}
		add(f)
	}
	return set
}

// surface is all that clients rest on: what a name or a number stands for.
func surface(set *descriptorpb.FileDescriptorSet) map[string]string {
	out := map[string]string{}
	var message func(prefix string, m *descriptorpb.DescriptorProto)
	enum := func(prefix string, e *descriptorpb.EnumDescriptorProto) {
		name := prefix + "." + e.GetName()
		out["enum "+name] = "is there"
		for _, v := range e.GetValue() {
			out[fmt.Sprintf("value %d of enum %s", v.GetNumber(), name)] = v.GetName()
		}
	}
	message = func(prefix string, m *descriptorpb.DescriptorProto) {
		name := prefix + "." + m.GetName()
		out["message "+name] = "is there"
		for _, f := range m.GetField() {
			oneof := ""
			if f.OneofIndex != nil && !f.GetProto3Optional() {
				oneof = " in the oneof " + m.GetOneofDecl()[f.GetOneofIndex()].GetName()
			}
			optional := ""
			if f.GetProto3Optional() {
				optional = "with presence "
			}
			out[fmt.Sprintf("field %d of message %s", f.GetNumber(), name)] = strings.ToLower(fmt.Sprintf("%s, %s%s %s%s%s", f.GetName(), optional,
				strings.TrimPrefix(f.GetLabel().String(), "LABEL_"), strings.TrimPrefix(f.GetType().String(), "TYPE_"), f.GetTypeName(), oneof))
		}
		for _, n := range m.GetNestedType() {
			message(name, n)
		}
		for _, e := range m.GetEnumType() {
			enum(name, e)
		}
	}
	for _, f := range set.GetFile() {
		if f.GetPackage() != "leadline.v1" {
			continue
		}
		for _, m := range f.GetMessageType() {
			message(f.GetPackage(), m)
		}
		for _, e := range f.GetEnumType() {
			enum(f.GetPackage(), e)
		}
		for _, s := range f.GetService() {
			for _, r := range s.GetMethod() {
				stream := map[bool]string{true: "stream ", false: ""}
				out[fmt.Sprintf("call %s.%s.%s", f.GetPackage(), s.GetName(), r.GetName())] = fmt.Sprintf("(%s%s) returns (%s%s)",
					stream[r.GetClientStreaming()], r.GetInputType(), stream[r.GetServerStreaming()], r.GetOutputType())
			}
		}
	}
	return out
}

// breaks lists what clients of the old API rest on and the new one has not.
func breaks(before, after *descriptorpb.FileDescriptorSet) (list []string) {
	now := surface(after)
	for what, was := range surface(before) {
		switch is, ok := now[what]; {
		case !ok:
			list = append(list, fmt.Sprintf("%s (%s) is gone", what, was))
		case is != was:
			list = append(list, fmt.Sprintf("%s was %s and is %s", what, was, is))
		}
	}
	slices.Sort(list)
	return list
}

// TestNothingBreaks compares the API with the one that clients know.
func TestNothingBreaks(t *testing.T) {
	now := present()
	rewrite := os.Getenv("LEADLINE_REWRITE")
	if rewrite != "" && (rewrite != "added" || breaks(known(t), now) == nil) {
		b, err := proto.MarshalOptions{Deterministic: true}.Marshal(now)
		if err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(baseline, b, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	before := known(t)
	if n := len(surface(before)); n < 300 {
		t.Fatalf("the baseline holds only %d things", n)
	}
	for _, b := range breaks(before, now) {
		t.Error(b)
	}
	if t.Failed() {
		t.Log("clients out there would break: give what is new a new number or name, and leave the old; see the comment on the baseline")
	} else if fresh := len(surface(now)) - len(surface(before)); fresh > 0 {
		t.Errorf("the baseline lacks %d things, so that nothing keeps them from being broken: run make generate", fresh)
	}
}

// known is the API of the baseline.
func known(t *testing.T) *descriptorpb.FileDescriptorSet {
	t.Helper()
	b, err := os.ReadFile(baseline)
	if err != nil {
		t.Fatal(err)
	}
	set := &descriptorpb.FileDescriptorSet{}
	if err := proto.Unmarshal(b, set); err != nil {
		t.Fatal(err)
	}
	return set
}

// TestBreaksAreFound proves that each way to break a client is found, and that
// additions are none.
func TestBreaksAreFound(t *testing.T) {
	file := func(set *descriptorpb.FileDescriptorSet, name string) *descriptorpb.FileDescriptorProto {
		i := slices.IndexFunc(set.GetFile(), func(f *descriptorpb.FileDescriptorProto) bool { return f.GetName() == "leadline/v1/"+name })
		return set.GetFile()[i]
	}
	message := func(set *descriptorpb.FileDescriptorSet, in, name string) *descriptorpb.DescriptorProto {
		ms := file(set, in).GetMessageType()
		return ms[slices.IndexFunc(ms, func(m *descriptorpb.DescriptorProto) bool { return m.GetName() == name })]
	}
	reply := func(set *descriptorpb.FileDescriptorSet) *descriptorpb.EnumDescriptorProto {
		return file(set, "feed.proto").GetEnumType()[0]
	}
	call := func(set *descriptorpb.FileDescriptorSet) *descriptorpb.MethodDescriptorProto {
		return file(set, "service.proto").GetService()[0].GetMethod()[0]
	}
	for _, c := range []struct {
		what   string
		change func(set *descriptorpb.FileDescriptorSet)
		want   string // "" is no break
	}{
		{"nothing", func(*descriptorpb.FileDescriptorSet) {}, ""},
		{"a new field", func(s *descriptorpb.FileDescriptorSet) {
			m := message(s, "feed.proto", "Closed")
			f := proto.CloneOf(m.GetField()[0])
			f.Number, f.Name = proto.Int32(99), proto.String("fresh")
			m.Field = append(m.Field, f)
		}, ""},
		{"a new value", func(s *descriptorpb.FileDescriptorSet) {
			reply(s).Value = append(reply(s).Value, &descriptorpb.EnumValueDescriptorProto{Name: proto.String("REPLY_SOME"), Number: proto.Int32(9)})
		}, ""},
		{"another number", func(s *descriptorpb.FileDescriptorSet) {
			message(s, "feed.proto", "Closed").Field[1].Number = proto.Int32(77)
		}, "field 2 of message leadline.v1.Closed (posteriors, optional uint64) is gone"},
		{"another name", func(s *descriptorpb.FileDescriptorSet) {
			message(s, "feed.proto", "Closed").Field[1].Name = proto.String("count")
		}, "was posteriors, optional uint64 and is count, optional uint64"},
		{"another type", func(s *descriptorpb.FileDescriptorSet) {
			message(s, "feed.proto", "Closed").Field[1].Type = descriptorpb.FieldDescriptorProto_TYPE_UINT32.Enum()
		}, "and is posteriors, optional uint32"},
		{"another message", func(s *descriptorpb.FileDescriptorSet) {
			message(s, "feed.proto", "Closed").Field[0].TypeName = proto.String(".leadline.v1.Receipt")
		}, "and is posterior, optional message.leadline.v1.receipt"},
		{"a list", func(s *descriptorpb.FileDescriptorSet) {
			message(s, "feed.proto", "Closed").Field[1].Label = descriptorpb.FieldDescriptorProto_LABEL_REPEATED.Enum()
		}, "and is posteriors, repeated uint64"},
		{"no presence", func(s *descriptorpb.FileDescriptorSet) {
			f := message(s, "where.proto", "WhereRequest").Field[3]
			f.OneofIndex, f.Proto3Optional = nil, nil
		}, "was integrity_risk, with presence optional double and is integrity_risk, optional double"},
		{"out of a oneof", func(s *descriptorpb.FileDescriptorSet) {
			message(s, "feed.proto", "FeedRequest").Field[1].OneofIndex = nil
		}, "in the oneof message and is batch"},
		{"no value", func(s *descriptorpb.FileDescriptorSet) { reply(s).Value = reply(s).Value[:3] }, "value 3 of enum leadline.v1.Reply (REPLY_NONE) is gone"},
		{"a renamed value", func(s *descriptorpb.FileDescriptorSet) { reply(s).Value[2].Name = proto.String("REPLY_ALL") }, "was REPLY_EVERY and is REPLY_ALL"},
		{"no message", func(s *descriptorpb.FileDescriptorSet) { file(s, "reason.proto").MessageType = nil }, "message leadline.v1.Failure (is there) is gone"},
		{"no call", func(s *descriptorpb.FileDescriptorSet) { file(s, "service.proto").Service[0].Method = nil }, "call leadline.v1.PositionService.Feed"},
		{"no stream", func(s *descriptorpb.FileDescriptorSet) { call(s).ClientStreaming = nil }, "was (stream .leadline.v1.FeedRequest)"},
		{"another answer", func(s *descriptorpb.FileDescriptorSet) { call(s).OutputType = proto.String(".leadline.v1.Closed") }, "and is (stream .leadline.v1.FeedRequest) returns (stream .leadline.v1.Closed)"},
	} {
		after := present()
		c.change(after)
		got := breaks(present(), after)
		if c.want == "" && len(got) > 0 || c.want != "" && (len(got) == 0 || !strings.Contains(strings.Join(got, "\n"), c.want)) {
			t.Errorf("%s: %q, want %q", c.what, got, c.want)
		}
	}
}

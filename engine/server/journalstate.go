package server

import (
	"context"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	leadlinev1 "leadline/proto/leadline/v1"
)

// DescribeJournal says how the journal is doing: see the .proto file.
func (s *Server) DescribeJournal(context.Context, *leadlinev1.DescribeJournalRequest) (*leadlinev1.DescribeJournalResponse, error) {
	if s.journal == nil {
		return nil, refuse(leadlinev1.Reason_REASON_NOT_OFFERED, nil, "this server has no journal: start it with --data or --broker")
	}
	st := s.journal.State()
	out := &leadlinev1.DescribeJournalResponse{
		Where: st.Where, Epoch: st.Epoch, Partitions: uint32(st.Partitions), Bytes: uint64(st.Bytes), MostBytes: uint64(st.MaxBytes),
		Records: st.Records, Refused: st.Refused, Waiting: uint64(st.Waiting), KeepForS: st.MaxAge.Seconds(),
	}
	out.OwnPartitions = uint32(st.Own)
	if s.shared != nil {
		for _, other := range s.shared.Others() {
			out.OtherServers = append(out.OtherServers, other.Address)
		}
	}
	if st.FreeBytes >= 0 {
		out.FreeBytes, out.LeaveBytes = proto.Uint64(uint64(st.FreeBytes)), proto.Uint64(uint64(st.LeaveBytes))
	}
	if !st.Oldest.IsZero() {
		out.Oldest = timestamppb.New(st.Oldest)
	}
	if st.Err != nil {
		out.Failure = st.Err.Error()
	}
	return out, nil
}

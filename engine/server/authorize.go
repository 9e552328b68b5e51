package server

import (
	"slices"

	"leadline/engine/server/identity"
	leadlinev1 "leadline/proto/leadline/v1"
)

// scope is for which vehicles a role may make a call.
type scope int

const (
	none scope = iota
	own        // for the vehicle that it is
	all        // for every vehicle, and where a call concerns none
)

// rule is who may make a call. vehicles, where a call concerns some, names
// those that a message of it asks for; every says that it asks for all.
type rule struct {
	vehicle, dispatcher, analyst, administrator scope
	vehicles                                    func(message any) (names []string, every bool)
}

// rules is the table of who may do what; a call that is not in it is nobody's.
// docs/server.md has the same table, and a test compares each of its cells with
// what a server does. An administrator reads no positions: nothing of what one
// does needs them.
var rules = map[string]rule{
	leadlinev1.PositionService_Feed_FullMethodName:            {vehicle: own, vehicles: fedVehicle},
	leadlinev1.PositionService_Where_FullMethodName:           {vehicle: own, dispatcher: all, analyst: all, vehicles: namedVehicles},
	leadlinev1.PositionService_Follow_FullMethodName:          {vehicle: own, dispatcher: all, analyst: all, vehicles: followedVehicles},
	leadlinev1.PositionService_Traffic_FullMethodName:         {vehicle: own, dispatcher: all, analyst: all, vehicles: namedRoad},
	leadlinev1.PositionService_FollowTraffic_FullMethodName:   {vehicle: own, dispatcher: all, analyst: all, vehicles: namedRoad},
	leadlinev1.PositionService_Trail_FullMethodName:           {vehicle: own, dispatcher: all, analyst: all, vehicles: namedVehicle},
	leadlinev1.PositionService_ListEndedDrives_FullMethodName: {dispatcher: all, analyst: all},
	leadlinev1.PositionService_AddSighting_FullMethodName:     {vehicle: own, dispatcher: all, vehicles: namedVehicle},
	leadlinev1.PositionService_SeeAlarm_FullMethodName:        {dispatcher: all},
	leadlinev1.PositionService_ListVehicles_FullMethodName:    {dispatcher: all, analyst: all, administrator: all},
	leadlinev1.PositionService_EndDrive_FullMethodName:        {vehicle: own, administrator: all, vehicles: namedVehicle},
	leadlinev1.PositionService_EraseVehicle_FullMethodName:    {administrator: all},
	leadlinev1.PositionService_DescribeJournal_FullMethodName: {administrator: all},
	leadlinev1.PositionService_ListMaps_FullMethodName:        {vehicle: all, dispatcher: all, analyst: all, administrator: all},
	leadlinev1.PositionService_DescribeMap_FullMethodName:     {vehicle: all, dispatcher: all, analyst: all, administrator: all},
	leadlinev1.PositionService_DrawMap_FullMethodName:         {vehicle: all, dispatcher: all, analyst: all, administrator: all},
	leadlinev1.PositionService_Forecast_FullMethodName:        {dispatcher: all, analyst: all},
	leadlinev1.PositionService_ListResults_FullMethodName:     {analyst: all},
	leadlinev1.PositionService_ReadResult_FullMethodName:      {analyst: all},
	leadlinev1.PositionService_ListSuites_FullMethodName:      {vehicle: all, dispatcher: all, analyst: all, administrator: all},
	leadlinev1.PositionService_DescribeSuite_FullMethodName:   {vehicle: all, dispatcher: all, analyst: all, administrator: all},
	leadlinev1.PositionService_UploadMap_FullMethodName:       {administrator: all},
	leadlinev1.PositionService_UploadMapPart_FullMethodName:   {administrator: all},
}

// fedVehicle is the vehicle that a stream is opened for. What follows on the
// stream belongs to that one, and before it nothing is taken.
func fedVehicle(m any) ([]string, bool) {
	if r, ok := m.(*leadlinev1.FeedRequest); ok && r.GetOpen() != nil {
		return []string{r.GetOpen().GetHeader().GetVehicle()}, false
	}
	return nil, false
}

func namedVehicle(m any) ([]string, bool) {
	if r, ok := m.(interface{ GetVehicle() string }); ok {
		return []string{r.GetVehicle()}, false
	}
	return nil, true
}

// namedRoad is the road that is asked for: who feeds it is known by its name.
func namedRoad(m any) ([]string, bool) {
	if r, ok := m.(*leadlinev1.FollowTrafficRequest); ok {
		m = r.GetTraffic()
	}
	if r, ok := m.(*leadlinev1.TrafficRequest); ok && r != nil {
		return []string{r.GetRoad()}, false
	}
	return nil, true
}

// namedVehicles are those of a list, in which none means all.
func namedVehicles(m any) ([]string, bool) {
	if r, ok := m.(interface{ GetVehicles() []string }); ok && len(r.GetVehicles()) > 0 {
		return r.GetVehicles(), false
	}
	return nil, true
}

// followedVehicles are the same; alarms and roads are told of all.
func followedVehicles(m any) ([]string, bool) {
	if r, ok := m.(*leadlinev1.FollowRequest); ok && (r.GetAlarms() || r.GetRoads()) {
		return nil, true
	}
	return namedVehicles(m)
}

// scope is the widest that one of the caller's roles has.
func (r *rule) scope(c *identity.Caller) scope {
	widest := none
	for role, s := range map[identity.Role]scope{
		identity.Vehicle: r.vehicle, identity.Dispatcher: r.dispatcher, identity.Analyst: r.analyst, identity.Administrator: r.administrator,
	} {
		if c.Is(role) {
			widest = max(widest, s)
		}
	}
	return widest
}

// allows refuses a message that a caller may not send. What it refuses does not
// depend on which vehicles there are.
func allows(method string, c *identity.Caller, message any) error {
	r, known := rules[method]
	where := about{"method": method}
	if !known {
		return refuse(leadlinev1.Reason_REASON_NOT_ALLOWED, where, "%s is not for %s: no rule names it", clip(method), roles(c))
	}
	switch r.scope(c) {
	case all:
		return nil
	case own:
		names, every := r.vehicles(message)
		if every {
			return refuse(leadlinev1.Reason_REASON_NOT_ALLOWED, where, "a vehicle may ask for itself alone: name %q", clip(c.Name))
		}
		if i := slices.IndexFunc(names, func(n string) bool { return n != c.Name }); i >= 0 {
			where["vehicle"] = names[i]
			return refuse(leadlinev1.Reason_REASON_NOT_ALLOWED, where, "%q may do that for itself alone and not for %q", clip(c.Name), clip(names[i]))
		}
		return nil
	}
	return refuse(leadlinev1.Reason_REASON_NOT_ALLOWED, where, "%s is not for %s: see the table of roles in docs/server.md", clip(method), roles(c))
}

func roles(c *identity.Caller) string {
	names := make([]string, len(c.Roles))
	for i, r := range c.Roles {
		names[i] = string(r)
	}
	return known(names)
}

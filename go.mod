module leadline

go 1.26.0

require (
	github.com/apache/arrow-go/v18 v18.9.0 // indirect
	github.com/goccy/go-yaml v1.19.2 // indirect
	github.com/paulmach/orb v0.14.0 // indirect
	github.com/paulmach/osm v0.8.0 // indirect
	github.com/tidwall/geoindex v1.7.0 // indirect
	github.com/tidwall/rtree v1.10.0 // indirect
	go.mongodb.org/mongo-driver/v2 v2.5.0 // indirect
	go.uber.org/goleak v1.3.0 // indirect
	golang.org/x/image v0.48.0 // indirect
	golang.org/x/net v0.61.0 // indirect
	golang.org/x/sys v0.50.0 // indirect
	golang.org/x/text v0.44.0 // indirect
	gonum.org/v1/gonum v0.17.0 // indirect
	google.golang.org/genproto/googleapis/rpc v0.0.0-20260817212433-ac3dfec99bb1 // indirect
	google.golang.org/grpc v1.85.0 // indirect
	google.golang.org/protobuf v1.36.12 // indirect
	pgregory.net/rapid v1.3.0 // indirect
)

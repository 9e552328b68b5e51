/**
 * Whether an error says that the server was not reached, or went away. What a
 * network says comes under several codes; what the server says has details.
 * @param {unknown} reason
 */
export function away(reason: unknown): boolean;
export function shows(token?: Token | undefined): import("@connectrpc/connect").Interceptor[];
export function sleep(ms: number): Promise<any>;
/**
 * Asks a Leadline server where vehicles are. Failures are ConnectErrors: code
 * and rawMessage say what was wrong.
 *
 * An aid and not certified: a position may be wrong although it is called
 * located.
 */
export class Client {
    /**
     * @param {import("@connectrpc/connect").Transport} transport
     * @param {number} patienceS how long to try again when the server is away, s
     */
    constructor(transport: import("@connectrpc/connect").Transport, patienceS?: number);
    /** All calls as they stand. */
    calls: import("@connectrpc/connect").Client<import("@bufbuild/protobuf/codegenv2").GenService<{
        feed: {
            methodKind: "bidi_streaming";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/feed_pb.js").FeedRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/feed_pb.js").FeedResponse>;
        };
        where: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/where_pb.js").WhereRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/where_pb.js").WhereResponse>;
        };
        follow: {
            methodKind: "server_streaming";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/follow_pb.js").FollowRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/follow_pb.js").FollowResponse>;
        };
        traffic: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/traffic_pb.js").TrafficRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/traffic_pb.js").TrafficResponse>;
        };
        followTraffic: {
            methodKind: "server_streaming";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/traffic_pb.js").FollowTrafficRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/traffic_pb.js").FollowTrafficResponse>;
        };
        trail: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/trail_pb.js").TrailRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/trail_pb.js").TrailResponse>;
        };
        listEndedDrives: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/trail_pb.js").ListEndedDrivesRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/trail_pb.js").ListEndedDrivesResponse>;
        };
        addSighting: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/trail_pb.js").AddSightingRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/trail_pb.js").AddSightingResponse>;
        };
        seeAlarm: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/alarm_pb.js").SeeAlarmRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/alarm_pb.js").SeeAlarmResponse>;
        };
        listVehicles: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/fleet_pb.js").ListVehiclesRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/fleet_pb.js").ListVehiclesResponse>;
        };
        endDrive: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/fleet_pb.js").EndDriveRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/fleet_pb.js").EndDriveResponse>;
        };
        eraseVehicle: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/fleet_pb.js").EraseVehicleRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/fleet_pb.js").EraseVehicleResponse>;
        };
        describeJournal: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("@bufbuild/protobuf").Message<"leadline.v1.DescribeJournalRequest">>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/fleet_pb.js").DescribeJournalResponse>;
        };
        listMaps: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("@bufbuild/protobuf").Message<"leadline.v1.ListMapsRequest">>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/map_pb.js").ListMapsResponse>;
        };
        describeMap: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/map_pb.js").DescribeMapRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/map_pb.js").DescribeMapResponse>;
        };
        drawMap: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/draw_pb.js").DrawMapRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/draw_pb.js").DrawMapResponse>;
        };
        forecast: {
            methodKind: "server_streaming";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/forecast_pb.js").ForecastRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/forecast_pb.js").ForecastResponse>;
        };
        listResults: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/results_pb.js").ListResultsRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/results_pb.js").ListResultsResponse>;
        };
        readResult: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/results_pb.js").ReadResultRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/results_pb.js").ReadResultResponse>;
        };
        listSuites: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("@bufbuild/protobuf").Message<"leadline.v1.ListSuitesRequest">>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/map_pb.js").ListSuitesResponse>;
        };
        describeSuite: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/map_pb.js").DescribeSuiteRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/map_pb.js").DescribeSuiteResponse>;
        };
        uploadMap: {
            methodKind: "client_streaming";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/map_pb.js").UploadMapRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/map_pb.js").UploadMapResponse>;
        };
        uploadMapPart: {
            methodKind: "unary";
            input: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/map_pb.js").UploadMapPartRequest>;
            output: import("@bufbuild/protobuf/codegenv2").GenMessage<import("./leadline/v1/map_pb.js").UploadMapPartResponse>;
        };
    }>>;
    patienceS: number;
    /**
     * Goes to another server, where there is one, unless that has been done since.
     * @param {unknown} calls what a call failed over
     */
    turn(calls: unknown): void;
    /**
     * Says where vehicles are.
     * @param {string[]} vehicles
     * @param {WhereWishes} [wishes] further fields of WhereRequest
     * @param {import("@connectrpc/connect").CallOptions} [options]
     */
    where(vehicles: string[], wishes?: (import("./leadline/v1/where_pb.js").WhereRequest | {
        readonly $typeName?: undefined;
        vehicles?: string[] | undefined;
        regionFractions?: number[] | undefined;
        area?: (import("./leadline/v1/place_pb.js").Polygon | {
            readonly $typeName?: undefined;
            rings?: (import("./leadline/v1/place_pb.js").Ring | {
                readonly $typeName?: undefined;
                points?: (import("./leadline/v1/place_pb.js").Position | {
                    readonly $typeName?: undefined;
                    lon?: number | undefined;
                    lat?: number | undefined;
                })[] | undefined;
            })[] | undefined;
        }) | undefined;
        integrityRisk?: number | undefined;
        predictToNow?: boolean | undefined;
        agoS?: number | undefined;
    }) | undefined, options?: import("@connectrpc/connect").CallOptions | undefined): Promise<import("./leadline/v1/where_pb.js").WhereResponse>;
    /**
     * Tells of vehicles as they move on, of all if none is named. When the stream
     * breaks, it goes on after what has been told.
     * @param {string[]} [vehicles]
     * @param {FollowWishes} [wishes] further fields of FollowRequest
     * @param {import("@connectrpc/connect").CallOptions} [options]
     */
    follow(vehicles?: string[] | undefined, wishes?: (import("./leadline/v1/follow_pb.js").FollowRequest | {
        readonly $typeName?: undefined;
        vehicles?: string[] | undefined;
        detail?: import("./leadline/v1/follow_pb.js").Detail | undefined;
        minIntervalS?: number | undefined;
        statusChangesOnly?: boolean | undefined;
        area?: (import("./leadline/v1/place_pb.js").Polygon | {
            readonly $typeName?: undefined;
            rings?: (import("./leadline/v1/place_pb.js").Ring | {
                readonly $typeName?: undefined;
                points?: (import("./leadline/v1/place_pb.js").Position | {
                    readonly $typeName?: undefined;
                    lon?: number | undefined;
                    lat?: number | undefined;
                })[] | undefined;
            })[] | undefined;
        }) | undefined;
        areaProbability?: number | undefined;
        regionFractions?: number[] | undefined;
        resumeToken?: string | undefined;
        alarms?: boolean | undefined;
        beliefCells?: number | undefined;
        roads?: boolean | undefined;
    }) | undefined, options?: import("@connectrpc/connect").CallOptions | undefined): AsyncGenerator<import("./leadline/v1/follow_pb.js").FollowResponse, void, unknown>;
}
export type WhereWishes = import("@bufbuild/protobuf").MessageInitShape<typeof import("./leadline/v1/where_pb.js").WhereRequestSchema>;
export type FollowWishes = import("@bufbuild/protobuf").MessageInitShape<typeof import("./leadline/v1/follow_pb.js").FollowRequestSchema>;
/**
 * A bearer token, or what gives one for each call.
 */
export type Token = string | (() => string | Promise<string>);

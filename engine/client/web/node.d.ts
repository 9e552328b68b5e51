export function connect(address: string, security?: Security | undefined): NodeClient;
/**
 * How a server is reached, and who calls. tls, or any of ca (authorities), cert and key
 * (one's own), all PEM texts, encrypt. Without encryption a token goes to this
 * machine alone.
 */
export type Security = {
    tls?: boolean;
    ca?: string;
    cert?: string;
    key?: string;
    token?: import("./client.js").Token;
};
/** A Client that can feed, too. */
declare class NodeClient extends Client {
    /**
     * @param {string} address
     * @param {Security} security
     */
    constructor(address: string, { tls, ca, cert, key, token }: Security);
    /** Closes the connection. */
    close: () => void;
    /**
     * Opens a drive. To continue one, give its name again, and send the same
     * batches from the first on, which are not sent twice, or with onward those
     * that come after what the server has. replace gives up another drive of the
     * vehicle; every asks for every posterior instead of each batch's last.
     * @param {object} header a DriveHeader
     * @param {{drive?: string, replace?: boolean, every?: boolean, onward?: boolean}} [wishes]
     */
    open(header: object, { drive, replace, every, onward }?: {
        drive?: string | undefined;
        replace?: boolean | undefined;
        every?: boolean | undefined;
        onward?: boolean | undefined;
    } | undefined): Promise<Drive>;
}
import { Client } from "./client.js";
/** An open drive. Wait for each call before the next. */
declare class Drive {
    /**
     * @param {NodeClient} client
     * @param {import("./leadline/v1/feed_pb.js").Open} opening
     */
    constructor(client: NodeClient, opening: import("./leadline/v1/feed_pb.js").Open);
    /** Batches that were sent. */
    sent: bigint;
    /** What the server said of the drive. */
    opened: import("./leadline/v1/feed_pb.js").Opened;
    /** @type {import("./leadline/v1/feed_pb.js").Refusal[]} What the server refused. */
    refusals: import("./leadline/v1/feed_pb.js").Refusal[];
    /** @type {import("@bufbuild/protobuf/wkt").Timestamp[]} Of posteriors that hold no more. */
    withdrawn: import("@bufbuild/protobuf/wkt").Timestamp[];
    client: NodeClient;
    opening: import("./leadline/v1/feed_pb.js").Open;
    connect(): Promise<void>;
    /**
     * Sends a batch, waits until the server has it, and gives the posteriors that
     * it released.
     * @param {object[]} measurements SensorMeasurements
     * @returns {Promise<import("./leadline/v1/posterior_pb.js").Posterior[]>}
     */
    send(measurements: object[]): Promise<import("./leadline/v1/posterior_pb.js").Posterior[]>;
    /**
     * Ends the drive and gives the server's last word.
     * @returns {Promise<import("./leadline/v1/feed_pb.js").Closed>}
     */
    end(): Promise<import("./leadline/v1/feed_pb.js").Closed>;
    /** Breaks off. A drive that has not been ended can be continued. */
    leave(): void;
    #private;
}
export {};

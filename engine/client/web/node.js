// @ts-check
// For programs of Node: everything, by gRPC.
//
//   const client = connect("127.0.0.1:7700");
//   const drive = await client.open({ vehicle: "van-1", map: "quillmere" });
//   const posteriors = await drive.send([{ time: "2030-05-01T12:00:15Z", measurement: { fix: { … } } }]);
//   const closed = await drive.end();
//   client.close();
//
// Headers and measurements are messages, or objects written as in drive files.
import { create, fromJson } from "@bufbuild/protobuf";
import { ConnectError, createClient } from "@connectrpc/connect";
import { Http2SessionManager, createGrpcTransport } from "@connectrpc/connect-node";
import { Client, away, shows, sleep } from "./client.js";
import { DriveHeaderSchema } from "./leadline/v1/drive_pb.js";
import { PositionService } from "./leadline/v1/service_pb.js";
import { FeedRequestSchema, OpenSchema, OpenedSchema, Reply } from "./leadline/v1/feed_pb.js";
import { SensorMeasurementSchema } from "./leadline/v1/measurement_pb.js";

/**
 * How a server is reached, and who calls. tls, or any of ca (authorities), cert and key
 * (one's own), all PEM texts, encrypt. Without encryption a token goes to this
 * machine alone.
 * @typedef {{tls?: boolean, ca?: string, cert?: string, key?: string, token?: import("./client.js").Token}} Security
 */

/**
 * Connects a program to a server, or to one of several that share their vehicles: to
 * another one when a call says that one is away or cut off.
 * @param {string} address HOST:PORT, of several with commas between them
 * @param {Security} [security]
 */
export const connect = (address, security = {}) => new NodeClient(address, security);

/** @type {(schema: any, given: any) => any} */
const message = (schema, given) => (given.$typeName ? given : fromJson(schema, given));

/** A Client that can feed, too. */
class NodeClient extends Client {
  /**
   * @param {string} address
   * @param {Security} security
   */
  constructor(address, { tls = false, ca, cert, key, token }) {
    const encrypted = tls || ca || cert || key;
    const addresses = address.split(",").map((a) => a.trim());
    if (token && !encrypted && !addresses.every((a) => /^(127\.0\.0\.1|\[::1\]|localhost):\d+$/.test(a)))
      throw new Error("a token would go in the clear to another machine: give tls");
    // A server that is cut off ends no connection: it is asked, and the connection given up without an answer.
    const asks = { pingIntervalMs: 11_000, pingTimeoutMs: 5_000 };
    /** @type {Http2SessionManager} */ let session;
    const transport = () => {
      const baseUrl = (encrypted ? "https://" : "http://") + addresses[0];
      session = new Http2SessionManager(baseUrl, asks, encrypted ? { ca, cert, key } : {});
      return createGrpcTransport({ baseUrl, sessionManager: session, interceptors: shows(token) });
    };
    // Not all vehicles begin with the same one.
    addresses.push(...addresses.splice(0, Math.floor(Math.random() * addresses.length)));
    super(transport());
    /** @param {unknown} calls */
    this.turn = (calls) => {
      if (addresses.length === 1 || calls !== this.calls) return;
      session.abort();
      addresses.push(/** @type {string} */ (addresses.shift()));
      this.calls = createClient(PositionService, transport());
    };
    /** Closes the connection. */
    this.close = () => session.abort();
  }

  /**
   * Says where vehicles are: see Client.
   * @param {string[]} vehicles
   * @param {import("./client.js").WhereWishes} [wishes]
   * @param {import("@connectrpc/connect").CallOptions} [options]
   */
  async where(vehicles, wishes, options) {
    const calls = this.calls;
    try {
      return await super.where(vehicles, wishes, options);
    } catch (e) {
      if (!away(e)) throw e;
      this.turn(calls);
      if (calls === this.calls) throw e;
      return super.where(vehicles, wishes, options);
    }
  }

  /**
   * Opens a drive. To continue one, give its name again, and send the same
   * batches from the first on, which are not sent twice, or with onward those
   * that come after what the server has. replace gives up another drive of the
   * vehicle; every asks for every posterior instead of each batch's last.
   * @param {object} header a DriveHeader
   * @param {{drive?: string, replace?: boolean, every?: boolean, onward?: boolean}} [wishes]
   */
  async open(header, { drive = crypto.randomUUID(), replace = false, every = false, onward = false } = {}) {
    const opening = create(OpenSchema, { header: message(DriveHeaderSchema, header), drive, replace, reply: every ? Reply.EVERY : Reply.LATEST });
    const opened = new Drive(this, opening);
    await opened.connect();
    if (onward) opened.sent = opened.opened.sequence;
    return opened;
  }
}

/** An open drive. Wait for each call before the next. */
class Drive {
  /** Batches that were sent. */
  sent = 0n;
  #lost = false;
  /** @type {unknown} What its stream goes over. */ #calls;
  #requests = new Queue();
  /** @type {AsyncIterator<any>} */ #responses = (async function* () {})();

  /** What the server said of the drive. */
  opened = create(OpenedSchema);
  /** @type {import("./leadline/v1/feed_pb.js").Refusal[]} What the server refused. */
  refusals = [];
  /** @type {import("@bufbuild/protobuf/wkt").Timestamp[]} Of posteriors that hold no more. */
  withdrawn = [];

  /**
   * @param {NodeClient} client
   * @param {import("./leadline/v1/feed_pb.js").Open} opening
   */
  constructor(client, opening) {
    this.client = client;
    this.opening = opening;
  }

  async connect() {
    this.#requests = new Queue();
    this.#calls = this.client.calls;
    this.#responses = this.client.calls.feed(this.#requests)[Symbol.asyncIterator]();
    this.#requests.push({ case: "open", value: this.opening });
    const first = (await this.#responses.next()).value;
    this.opened = first.message.value;
    this.#lost = false;
  }

  /**
   * Sends a batch, waits until the server has it, and gives the posteriors that
   * it released.
   * @param {object[]} measurements SensorMeasurements
   * @returns {Promise<import("./leadline/v1/posterior_pb.js").Posterior[]>}
   */
  async send(measurements) {
    if (++this.sent <= this.opened.sequence) return [];
    const value = { sequence: this.sent, measurements: measurements.map((m) => message(SensorMeasurementSchema, m)) };
    return (await this.#ask({ case: "batch", value })).posteriors;
  }

  /**
   * Ends the drive and gives the server's last word.
   * @returns {Promise<import("./leadline/v1/feed_pb.js").Closed>}
   */
  async end() {
    return (await this.#ask({ case: "end", value: {} })).closed;
  }

  /** Breaks off. A drive that has not been ended can be continued. */
  leave() {
    this.#requests.end();
    this.#responses.return?.().catch(() => {});
  }

  /**
   * @param {any} request
   * @returns {Promise<any>}
   */
  async #ask(request) {
    const until = Date.now() + this.client.patienceS * 1000;
    const posteriors = [];
    for (;;) {
      try {
        if (this.#lost) await this.connect();
        this.#requests.push(request);
        for (;;) {
          const { value, done } = await this.#responses.next();
          if (done) throw new Error("the server ended the stream without a word");
          const m = value.message;
          if (m.case === "posterior") posteriors.push(m.value);
          else if (m.case === "withdrawn") this.withdrawn.push(...m.value.times);
          else if (m.case === "receipt") {
            this.refusals.push(...m.value.refusals);
            return { posteriors };
          } else if (m.case === "closed") return { posteriors, closed: m.value };
        }
      } catch (e) {
        if (!(e instanceof ConnectError) || !away(e) || Date.now() > until) throw e;
        this.leave();
        this.#lost = true;
        this.client.turn(this.#calls);
        await sleep(1000);
      }
    }
  }
}

/** Requests on their way: an iterable that is pushed to. */
class Queue {
  /** @type {import("./leadline/v1/feed_pb.js").FeedRequest[]} */ #waiting = [];
  #over = false;
  #wake = () => {};

  /** @param {any} m */
  push(m) {
    this.#waiting.push(create(FeedRequestSchema, { message: m }));
    this.#wake();
  }

  end() {
    this.#over = true;
    this.#wake();
  }

  async *[Symbol.asyncIterator]() {
    for (;;) {
      for (let m; (m = this.#waiting.shift()); ) yield m;
      if (this.#over) return;
      await new Promise((resolve) => (this.#wake = () => resolve(undefined)));
    }
  }
}

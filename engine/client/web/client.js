// @ts-check
// What a page and a program of Node have in common: asking where vehicles are.
import { Code, ConnectError, createClient } from "@connectrpc/connect";
import { PositionService } from "./leadline/v1/service_pb.js";

/**
 * @typedef {import("@bufbuild/protobuf").MessageInitShape<typeof import("./leadline/v1/where_pb.js").WhereRequestSchema>} WhereWishes
 * @typedef {import("@bufbuild/protobuf").MessageInitShape<typeof import("./leadline/v1/follow_pb.js").FollowRequestSchema>} FollowWishes
 */

/**
 * A bearer token, or what gives one for each call.
 * @typedef {string | (() => string | Promise<string>)} Token
 */

/**
 * Shows a token with each call.
 * @param {Token} [token]
 * @returns {import("@connectrpc/connect").Interceptor[]}
 */
export const shows = (token) =>
  token
    ? [
        (next) => async (request) => {
          request.header.set("Authorization", "Bearer " + (typeof token === "string" ? token : await token()));
          return next(request);
        },
      ]
    : [];

/** @param {number} ms */
export const sleep = (ms) => new Promise((resolve) => setTimeout(resolve, ms));

/**
 * Whether an error says that the server was not reached, or went away. What a
 * network says comes under several codes; what the server says has details.
 * @param {unknown} reason
 */
export function away(reason) {
  const { code, details } = ConnectError.from(reason);
  return code === Code.Unavailable || (details.length === 0 && [Code.Unknown, Code.Internal, Code.Aborted].includes(code));
}

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
  constructor(transport, patienceS = 60) {
    /** All calls as they stand. */
    this.calls = createClient(PositionService, transport);
    this.patienceS = patienceS;
  }

  /**
   * Goes to another server, where there is one, unless that has been done since.
   * @param {unknown} calls what a call failed over
   */
  turn(calls) {}

  /**
   * Says where vehicles are.
   * @param {string[]} vehicles
   * @param {WhereWishes} [wishes] further fields of WhereRequest
   * @param {import("@connectrpc/connect").CallOptions} [options]
   */
  where(vehicles, wishes, options = { timeoutMs: 10_000 }) {
    return this.calls.where({ ...wishes, vehicles }, options);
  }

  /**
   * Tells of vehicles as they move on, of all if none is named. When the stream
   * breaks, it goes on after what has been told.
   * @param {string[]} [vehicles]
   * @param {FollowWishes} [wishes] further fields of FollowRequest
   * @param {import("@connectrpc/connect").CallOptions} [options]
   */
  async *follow(vehicles = [], wishes, options) {
    let resumeToken = wishes?.resumeToken ?? "";
    for (let tries = 1; ; tries++) {
      const began = Date.now();
      const calls = this.calls;
      try {
        for await (const news of calls.follow({ ...wishes, vehicles, resumeToken }, options)) {
          resumeToken = news.resumeToken;
          yield news;
        }
        return;
      } catch (e) {
        if (Date.now() > began + 5000) tries = 1;
        if (ConnectError.from(e).code === Code.InvalidArgument && resumeToken) resumeToken = ""; // the server has begun anew
        else if (!away(e) || tries > this.patienceS) throw e;
        else this.turn(calls);
        await sleep(1000);
      }
    }
  }
}

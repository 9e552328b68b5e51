// A stream of news that begins again by itself.
import { Code, ConnectError, type CallOptions } from "@connectrpc/connect";
import type { MessageInitShape } from "@bufbuild/protobuf";
import type { FollowRequestSchema, FollowResponse } from "../../client/web/leadline/v1/follow_pb.js";
import type { FollowTrafficRequestSchema, FollowTrafficResponse } from "../../client/web/leadline/v1/traffic_pb.js";
import { calls, sentence } from "./api";
import { needsRole, noteIdentity, token } from "./identity";

/** Denied: who asks may not know, and nothing is asked until the token is another. */
export type Link = { state: "connecting" | "live" | "away" | "denied"; why: string };

type Listener<M> = {
  news(m: M): void;
  /** The stream is there; fresh if it tells everything anew. */
  begins?(fresh: boolean): void;
  link(l: Link): void;
};

/** What is followed. */
type Source<M> = {
  open(resumeToken: string, options: CallOptions): AsyncIterable<M>;
  /** Where to go on after a message; empty where a stream tells everything anew. */
  resume(m: M): string;
  /** Whether nothing comes after a message: the stream's end is then that of what is followed. */
  last(m: M): boolean;
  /** What it is called that a role is needed for. */
  what: string;
  /** Hears that the stream is over for good: nothing comes after its last message, or there is nothing to follow. */
  over?(): void;
  /** Whether an error says that there is nothing to follow. */
  nothing?(e: unknown): boolean;
};

const sleep = (ms: number) => new Promise((resolve) => setTimeout(resolve, ms));

/** How long a stream may say nothing before the server is asked whether it is there, ms. */
const quietMost = 8000;

/** Follows vehicles until the returned function is called. */
export const follow = (wishes: MessageInitShape<typeof FollowRequestSchema>, on: Listener<FollowResponse>) =>
  listen({ open: (resumeToken, options) => calls.follow({ ...wishes, resumeToken }, options), resume: (m) => m.resumeToken, last: () => false, what: "Seeing positions" }, on);

/** Follows a road's traffic until it ends, the server does not know the road, or the returned function is called. */
export const followTraffic = (wishes: MessageInitShape<typeof FollowTrafficRequestSchema>, on: Listener<FollowTrafficResponse>, over: () => void) =>
  listen(
    {
      open: (_, options) => calls.followTraffic(wishes, options),
      resume: () => "",
      last: (m) => !!m.picture?.ended,
      what: "Seeing traffic",
      over,
      nothing: (e) => ConnectError.from(e).code === Code.NotFound,
    },
    on,
  );

function listen<M>(of: Source<M>, on: Listener<M>): () => void {
  let stopped = false;
  let abort = new AbortController();
  const run = async () => {
    let resumeToken = "";
    let pause = 250;
    while (!stopped) {
      abort = new AbortController();
      let heard = Date.now();
      // A network that has gone says nothing: ask.
      const watch = setInterval(async () => {
        if (Date.now() < heard + quietMost) return;
        heard = Date.now();
        await calls.listVehicles({ pageSize: 1 }, { timeoutMs: 5000 }).catch((e) => {
          if (ConnectError.from(e).details.length === 0) abort.abort();
        });
      }, 1000);
      const asked = token.peek();
      try {
        const fresh = resumeToken === "";
        const options = {
          signal: abort.signal,
          onHeader: () => {
            pause = 250;
            on.link({ state: "live", why: "" });
            on.begins?.(fresh);
          },
        };
        let over = false;
        for await (const m of of.open(resumeToken, options)) {
          heard = Date.now();
          resumeToken = of.resume(m);
          over = of.last(m);
          on.news(m);
        }
        if (over) {
          of.over?.();
          return;
        }
        on.link({ state: "away", why: "The server has ended the stream." });
      } catch (e) {
        if (stopped) return;
        if (ConnectError.from(e).code === Code.InvalidArgument && resumeToken) {
          resumeToken = ""; // the server has begun anew
          continue;
        }
        const lacking = needsRole(e, of.what, "dispatcher", "analyst");
        if (lacking) {
          on.link({ state: "denied", why: lacking });
          while (token.value === asked && !stopped) await sleep(250);
          continue;
        }
        if (of.nothing?.(e)) {
          on.link({ state: "away", why: sentence(e) });
          of.over?.();
          return;
        }
        const unknown = noteIdentity(e, asked);
        on.link({ state: "away", why: unknown ? "Your identity is not taken." : sentence(e) });
        if (unknown) {
          for (let i = 0; i < 40 && token.value === asked && !stopped; i++) await sleep(250);
          continue;
        }
      } finally {
        clearInterval(watch);
      }
      await sleep(pause);
      pause = Math.min(2 * pause, 4000);
    }
  };
  void run();
  return () => {
    stopped = true;
    abort.abort();
  };
}

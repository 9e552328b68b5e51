// A stream of news that begins again by itself.
import { Code, ConnectError } from "@connectrpc/connect";
import type { MessageInitShape } from "@bufbuild/protobuf";
import type { FollowRequestSchema, FollowResponse } from "../../client/web/leadline/v1/follow_pb.js";
import { calls, sentence } from "./api";
import { needsRole, noteIdentity, token } from "./identity";

/** Denied: who asks may not know, and nothing is asked until the token is another. */
export type Link = { state: "connecting" | "live" | "away" | "denied"; why: string };

type Listener = {
  news(m: FollowResponse): void;
  /** The stream is there; fresh if it tells everything anew. */
  begins(fresh: boolean): void;
  link(l: Link): void;
};

const sleep = (ms: number) => new Promise((resolve) => setTimeout(resolve, ms));

/** How long a stream may say nothing before the server is asked whether it is there, ms. */
const quietMost = 8000;

/** Follows until the returned function is called. */
export function follow(wishes: MessageInitShape<typeof FollowRequestSchema>, on: Listener): () => void {
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
      const asked = token.value;
      try {
        const fresh = resumeToken === "";
        const options = {
          signal: abort.signal,
          onHeader: () => {
            pause = 250;
            on.link({ state: "live", why: "" });
            on.begins(fresh);
          },
        };
        for await (const m of calls.follow({ ...wishes, resumeToken }, options)) {
          heard = Date.now();
          resumeToken = m.resumeToken;
          on.news(m);
        }
        on.link({ state: "away", why: "The server has ended the stream." });
      } catch (e) {
        if (stopped) return;
        if (ConnectError.from(e).code === Code.InvalidArgument && resumeToken) {
          resumeToken = ""; // the server has begun anew
          continue;
        }
        const lacking = needsRole(e, "Seeing positions", "dispatcher", "analyst");
        if (lacking) {
          on.link({ state: "denied", why: lacking });
          while (token.value === asked && !stopped) await sleep(250);
          continue;
        }
        on.link({ state: "away", why: sentence(e) });
        if (noteIdentity(e)) {
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

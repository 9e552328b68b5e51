// The server's calls.
import { Code, ConnectError, createClient } from "@connectrpc/connect";
import { createConnectTransport } from "@connectrpc/connect-web";
import { BinaryReader } from "@bufbuild/protobuf/wire";
import { PositionService } from "../../client/web/leadline/v1/service_pb.js";
import { identify } from "./identity";

export const calls = createClient(
  PositionService,
  createConnectTransport({ baseUrl: location.origin, useBinaryFormat: true, interceptors: [identify] }),
);

/** What went wrong with a call, as a sentence. */
export function sentence(e: unknown): string {
  const { code, rawMessage, details } = ConnectError.from(e);
  if (details.length === 0 && [Code.Unknown, Code.Unavailable, Code.Internal, Code.Aborted].includes(code)) {
    return "The server does not answer.";
  }
  const text = rawMessage.charAt(0).toUpperCase() + rawMessage.slice(1);
  return /[.!?]$/.test(text) ? text : text + ".";
}

/** The server's reason for refusing a call, as reason.proto has it without REASON_; empty if it gave none. */
export function reasonOf(e: unknown): string {
  for (const d of ConnectError.from(e).details) {
    if (!("type" in d) || d.type !== "google.rpc.ErrorInfo") continue;
    const r = new BinaryReader(d.value);
    while (r.pos < r.len) {
      const [field, wire] = r.tag();
      if (field === 1) return r.string();
      r.skip(wire, field);
    }
  }
  return "";
}

/** Patience with calls that are answered at once, ms. */
export const soon = { timeoutMs: 15_000 };

// The server's calls.
import { Code, ConnectError, createClient } from "@connectrpc/connect";
import { createConnectTransport } from "@connectrpc/connect-web";
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

/** Patience with calls that are answered at once, ms. */
export const soon = { timeoutMs: 15_000 };

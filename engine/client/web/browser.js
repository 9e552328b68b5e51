// @ts-check
// For pages: Where and Follow by Connect. A page of another origin than the
// server's needs the server's flag --origin.
import { createConnectTransport } from "@connectrpc/connect-web";
import { Client, shows } from "./client.js";

/**
 * Connects a page to a server.
 * @param {string} [url] of the server; the page's own origin if left out
 * @param {{token?: import("./client.js").Token}} [identity] who calls
 */
export const connect = (url = location.origin, { token } = {}) =>
  new Client(createConnectTransport({ baseUrl: url, useBinaryFormat: true, interceptors: shows(token) }));

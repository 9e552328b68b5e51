export function connect(url?: string | undefined, { token }?: {
    token?: import("./client.js").Token | undefined;
} | undefined): Client;
import { Client } from "./client.js";

export function connect(url?: string | undefined): Client;
import { Client } from "./client.js";

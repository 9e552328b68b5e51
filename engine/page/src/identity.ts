// Who uses the page: the one place where a bearer token is kept and attached.
import { Code, ConnectError, type Interceptor } from "@connectrpc/connect";
import { signal } from "@preact/signals";

const key = "leadline-token";

function stored(): string {
  try {
    return sessionStorage.getItem(key) ?? "";
  } catch {
    return "";
  }
}

/** The bearer token; empty where the server asks for none. */
export const token = signal(stored());

/** Why the server does not take who asks, in words; empty if it does. */
export const identityTrouble = signal("");

/** Whether another token is to be asked for, since this one's roles do not allow all. */
export const wantsToken = signal(false);

/** Takes another token, for as long as the tab is open. */
export function useToken(text: string) {
  token.value = text.trim();
  identityTrouble.value = "";
  wantsToken.value = false;
  try {
    sessionStorage.setItem(key, token.value);
  } catch {
    // It is then gone with the page.
  }
}

/** How often the server has not taken a token. */
let refusals = 0;

/**
 * Attaches the token to every call, and notes when it is not taken. An answer says that it is
 * taken now only if it was asked for after the last refusal, and with the token of now.
 */
export const identify: Interceptor = (next) => async (request) => {
  const [shown, before] = [token.peek(), refusals];
  if (shown) request.header.set("Authorization", `Bearer ${shown}`);
  try {
    const answer = await next(request);
    if (!answer.stream && shown === token.peek() && before === refusals) identityTrouble.value = "";
    return answer;
  } catch (e) {
    noteIdentity(e, shown);
    throw e;
  }
};

/** Notes an error that is about who asks, with the token that was shown, and reports whether it was one. */
export function noteIdentity(e: unknown, shown: string): boolean {
  const error = ConnectError.from(e);
  if (error.code !== Code.Unauthenticated) return false;
  if (shown !== token.peek()) return true; // another one is shown by now
  refusals++;
  identityTrouble.value = token.value
    ? `Your identity has expired or is not known here: enter a new token. The server says: ${error.rawMessage}`
    : `This server wants to know who you are: enter your token. The server says: ${error.rawMessage}`;
  return true;
}

/** What to say where a call needs a role that the caller has not; undefined if that is not what is wrong. */
export function needsRole(e: unknown, what: string, ...roles: string[]): string | undefined {
  const error = ConnectError.from(e);
  if (error.code !== Code.PermissionDenied || error.details.length === 0) return undefined;
  wantsToken.value = true;
  return `${what} needs the role ${roles.join(" or ")}, which you have not. Enter a token that has it, above, or ask somebody who has one.`;
}

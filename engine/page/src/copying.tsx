// Giving away what the page knows.
import { useSignal } from "@preact/signals";
import { useRef } from "preact/hooks";

/** Puts text on the clipboard; false if the browser does not allow it. */
async function put(text: string): Promise<boolean> {
  try {
    await navigator.clipboard.writeText(text);
    return true;
  } catch {
    return false;
  }
}

/** A button that copies a text, which it shows where it may not. */
export function Copy({ words, text }: { words: string; text: () => string | Promise<string> }) {
  const said = useSignal("");
  const shown = useSignal("");
  const area = useRef<HTMLTextAreaElement>(null);
  return (
    <span class="copy">
      <button
        type="button"
        onClick={async () => {
          const t = await text();
          const done = await put(t);
          shown.value = done ? "" : t;
          said.value = done ? "Copied." : "The browser does not let the page copy: take it from here.";
          if (!done) setTimeout(() => area.current?.select());
          else setTimeout(() => (said.value = ""), 4000);
        }}
      >
        {words}
      </button>{" "}
      <span role="status">{said.value}</span>
      {shown.value && <textarea ref={area} readOnly rows={4} aria-label={words} value={shown.value} />}
    </span>
  );
}

/** A word for a shell. */
export const shellWord = (s: string) => (/^[\w@%+=:,./-]+$/.test(s) ? s : `'${s.replaceAll("'", `'\\''`)}'`);

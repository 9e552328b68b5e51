// What the person at the page has chosen; kept in the browser.
import { effect, signal } from "@preact/signals";

function kept<T>(name: string, fallback: T) {
  const key = "leadline-" + name;
  let value = fallback;
  try {
    const text = localStorage.getItem(key);
    if (text !== null) value = JSON.parse(text) as T;
  } catch {
    // The browser keeps nothing: the fallback holds.
  }
  const s = signal(value);
  let first = true;
  effect(() => {
    const text = JSON.stringify(s.value);
    if (first) {
      first = false;
      return;
    }
    try {
      localStorage.setItem(key, text);
    } catch {
      // It holds until the page is closed.
    }
  });
  return s;
}

export const units = kept<"metric" | "nautical">("units", "metric");
export const lightness = kept<"system" | "light" | "dark">("lightness", "system");
export const who = kept("who", "");
export const sound = kept("sound", false);

const preference = matchMedia("(prefers-color-scheme: dark)");
const systemDark = signal(preference.matches);
preference.addEventListener("change", (e) => (systemDark.value = e.matches));

/** Whether the page is dark now. */
export const dark = signal(false);
effect(() => {
  dark.value = lightness.value === "dark" || (lightness.value === "system" && systemDark.value);
  document.documentElement.dataset.lightness = dark.value ? "dark" : "light";
});

/** The page's clock, ms; it moves on twice a second. */
export const clock = signal(Date.now());
setInterval(() => (clock.value = Date.now()), 500);

// Signing in: name and password for a session, then back to the page that was asked for.
import { $, setText, startPalette } from "/page.js";

startPalette();
$("sign_in").addEventListener("submit", async (event) => {
  event.preventDefault();
  const form = new FormData(event.target);
  setText($("said"), "");
  try {
    const answer = await fetch("/api/sign-in", {
      method: "POST",
      headers: { "Content-Type": "application/json" },
      body: JSON.stringify({ name: form.get("name").trim(), password: form.get("password") }),
      signal: AbortSignal.timeout(10000),
    });
    // Only a path of this server, whatever the address says.
    const to = location.hash.slice(1);
    if (answer.ok) location.replace(/^\/[a-z]*(\?[^/\\]*)?$/.test(to) ? to : "/");
    else setText($("said"), "Not signed in: " + (await answer.json()).error + ".");
  } catch {
    setText($("said"), "Not signed in: no answer; try again.");
  }
});

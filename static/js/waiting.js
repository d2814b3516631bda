// waiting.js: a job may take seconds, so the button says that it was heard.
export function showWaiting(form) {
  const button = form.querySelector("button[type=submit]");
  if (!button) return;
  const asked = button.textContent;
  form.addEventListener("submit", () => (button.textContent = "Computing…"));
  window.addEventListener("pageshow", () => (button.textContent = asked));
}

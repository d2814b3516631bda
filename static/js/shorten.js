// shorten.js: leave out of the address what is empty or as it was by default. The answer is the same.
export function shortenAddress(form) {
  const spare = () =>
    [...form.elements].filter((field) => field.name && field.dataset.default !== undefined && field.value === field.dataset.default);
  form.addEventListener("submit", () => {
    const left = spare();
    left.forEach((field) => (field.disabled = true));
    setTimeout(() => left.forEach((field) => (field.disabled = false)));
  });
}

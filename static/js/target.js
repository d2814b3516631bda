// target.js: a link to something inside a folded part opens that part.
export function openTarget() {
  const target = location.hash.length > 1 && document.getElementById(decodeURIComponent(location.hash.slice(1)));
  if (!target) return;
  let opened = false;
  for (let fold = target.closest("details"); fold; fold = fold.parentElement.closest("details")) {
    opened ||= !fold.open;
    fold.open = true;
  }
  if (opened) target.scrollIntoView();
}

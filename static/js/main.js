// Comfort only: every page is whole without it.
import { addReadout } from "./readout.js";
import { shortenAddress } from "./shorten.js";
import { openTarget } from "./target.js";
import { showWaiting } from "./waiting.js";

document.querySelectorAll("figure[data-readout]").forEach(addReadout);
document.querySelectorAll("form.job").forEach(shortenAddress);
document.querySelectorAll("form.job").forEach(showWaiting);
openTarget();
window.addEventListener("hashchange", openTarget);

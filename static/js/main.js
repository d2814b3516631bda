// Comfort only: every page is whole without it.
import { addReadout } from "./readout.js";
import { shortenAddress } from "./shorten.js";
import { openTarget } from "./target.js";

document.querySelectorAll("figure[data-readout]").forEach(addReadout);
document.querySelectorAll("form.job").forEach(shortenAddress);
openTarget();
window.addEventListener("hashchange", openTarget);

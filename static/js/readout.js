// readout.js: point at a chart, read its numbers. They stand in the chart's own table already.
export function addReadout(figure) {
  const chart = figure.querySelector("svg.chart");
  const cursor = figure.querySelector(".cursor");
  const output = figure.querySelector("output");
  const heads = [...figure.querySelectorAll("table thead th")].map((cell) => cell.textContent);
  const rows = [...figure.querySelectorAll("table tbody tr")].map((row) => [...row.cells].map((cell) => cell.textContent));
  const left = Number(chart.dataset.left);
  const right = Number(chart.dataset.right);
  let at = Math.floor(rows.length / 2);

  function show(index) {
    at = Math.max(0, Math.min(rows.length - 1, index));
    const x = left + ((at + 0.5) / rows.length) * (right - left);
    cursor.setAttribute("transform", `translate(${x - left} 0)`);
    cursor.setAttribute("visibility", "visible");
    const [time, ...values] = rows[at];
    output.textContent = [time, ...values.map((value, i) => `${value} ${heads[i + 1].replace("Junction, ", "")}`)].join("   ");
  }

  output.hidden = false;
  output.textContent = "Point at the chart, or use the arrow keys, to read its numbers.";
  chart.setAttribute("tabindex", "0");
  chart.addEventListener("pointermove", ({ clientX }) => {
    const box = chart.getBoundingClientRect();
    const x = ((clientX - box.left) / box.width) * chart.viewBox.baseVal.width;
    show(Math.floor(((x - left) / (right - left)) * rows.length));
  });
  chart.addEventListener("keydown", (event) => {
    const step = { ArrowLeft: -1, ArrowRight: 1 }[event.key];
    if (step) {
      event.preventDefault();
      show(at + step);
    }
  });
}

// The page: starts its parts, opens what a link leads to, and prints whole.

function startTests() {
  for (const button of document.querySelectorAll("button[data-counts]")) {
    button.addEventListener("click", () => {
      for (const other of button.parentElement.querySelectorAll("button")) {
        other.setAttribute("aria-pressed", String(other === button));
      }
      setCounts(button.dataset.counts === "log");
    });
  }
  const find = document.getElementById("find-test");
  find?.addEventListener("input", () => {
    const wanted = find.value.trim().toLowerCase();
    for (const card of document.querySelectorAll("details.test")) {
      card.hidden = !card.querySelector("h3").textContent.toLowerCase().includes(wanted);
    }
  });
}

// A link to a test opens its card.
function openTarget() {
  const target = location.hash.length > 1 && document.getElementById(location.hash.slice(1));
  if (target && target.matches("details.card")) target.open = true;
}

// On paper every card is open and every chart drawn; afterwards the screen is
// as the reader left it.
let opened = [];

function beforePrint() {
  opened = [...document.querySelectorAll("details.card:not([open]), details.rest:not([open])")];
  for (const card of opened) card.open = true;
  chartsForPaper();
}

function afterPrint() {
  for (const card of opened) card.open = false;
  opened = [];
  chartsForScreen();
}

startTables();
startMaps();
startTests();
startCharts();
openTarget();
addEventListener("hashchange", openTarget);
addEventListener("beforeprint", beforePrint);
addEventListener("afterprint", afterPrint);

// Runs before the first paint, so that a chosen theme does not flash. No module: modules are deferred.
(function () {
  try {
    const theme = localStorage.getItem("curvebank.theme");
    if (theme === "light" || theme === "dark") document.documentElement.dataset.theme = theme;
  } catch {
    // A browser that forbids storage follows the system's theme.
  }
})();

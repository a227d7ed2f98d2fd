(() => {
  const root = document.documentElement;
  const button = document.getElementById("theme");
  const isDark = () => root.dataset.theme ? root.dataset.theme === "dark" : matchMedia("(prefers-color-scheme: dark)").matches;
  const show = () => {
    button.setAttribute("aria-pressed", String(isDark()));
    button.textContent = isDark() ? "Light view" : "Dark view";
  };
  button.addEventListener("click", () => { root.dataset.theme = isDark() ? "light" : "dark"; show(); });
  show();
  const links = new Map([...document.querySelectorAll("nav.side a")].map((a) => [a.hash.slice(1), a]));
  const watcher = new IntersectionObserver((entries) => {
    for (const entry of entries) {
      if (!entry.isIntersecting) continue;
      links.forEach((a) => a.removeAttribute("aria-current"));
      links.get(entry.target.id)?.setAttribute("aria-current", "true");
    }
  }, { rootMargin: "-10% 0px -80% 0px" });
  document.querySelectorAll("section.part").forEach((s) => watcher.observe(s));
})();

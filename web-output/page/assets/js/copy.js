// Copy buttons. Reads only what stands on the page.

export function mountCopy(page) {
  for (const b of document.querySelectorAll("[data-copy]")) {
    b.addEventListener("click", async () => {
      const from = document.getElementById(b.dataset.copy);
      let done = false;
      try {
        await navigator.clipboard.writeText(from.textContent);
        done = true;
      } catch {
        const range = document.createRange();
        range.selectNodeContents(from);
        const s = getSelection();
        s.removeAllRanges();
        s.addRange(range);
        done = document.execCommand("copy");
      }
      page.say(done ? "Copied" : "Selected: copy with the keyboard");
    });
  }
}

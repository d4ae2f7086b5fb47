// Adds and removes rows of a form in place: the server makes the rows, as it does without this module.

async function changed(form, button) {
  const answer = await fetch(form.action, { method: "POST", body: new FormData(form, button), redirect: "error" });
  const page = new DOMParser().parseFromString(await answer.text(), "text/html");
  const fresh = answer.ok ? page.getElementById(form.id) : null;
  if (!fresh) throw new Error(`no form in the answer, status ${answer.status}`);
  return document.adoptNode(fresh);
}

document.addEventListener("submit", async (event) => {
  const form = event.target;
  const button = event.submitter;
  if (!form.matches("form[data-rows]") || !button || !/^(add|remove)-/.test(button.value)) return;
  event.preventDefault();
  try {
    const fresh = await changed(form, button);
    const next = fresh.querySelector("[autofocus]");
    next?.removeAttribute("autofocus");
    form.replaceWith(fresh);
    next?.focus();
  } catch {
    // Without an answer to show in place, the browser asks for the page itself and shows what comes.
    const choice = document.createElement("input");
    Object.assign(choice, { type: "hidden", name: button.name, value: button.value });
    form.append(choice);
    HTMLFormElement.prototype.submit.call(form);
  }
});

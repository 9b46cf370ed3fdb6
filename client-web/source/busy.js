// Counts what is being asked or arranged, so that the page can say when it has come to rest: data-busy on the body.

let underWay = 0;

/** Something begins; call what it returns, once, when it has ended. */
export function begin() {
  let isOpen = true;
  underWay += 1;
  document.body.dataset.busy = 'yes';
  return () => {
    if (!isOpen) return;
    isOpen = false;
    underWay -= 1;
    if (underWay === 0) delete document.body.dataset.busy;
  };
}

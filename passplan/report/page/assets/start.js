  // ---- where to begin: the contact in the address, else the one with the most to see ------------------------------
  if (data.contacts.length) {
    const asked = /^#c(\d+)$/.exec(location.hash);
    const best = data.contacts.reduce((top, c, i) => (c.t && c.mb > data.contacts[top].mb ? i : top), 0);
    choose(asked && asked[1] < data.contacts.length ? Number(asked[1]) : best, false);
  }

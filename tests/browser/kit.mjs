// Named checks, one after the other: a failed one is told and does not hide the next.
const failed = [];

/** Runs a check; what it throws is its failure. */
export async function check(name, body) {
  try {
    await body();
    console.log("  holds   " + name);
  } catch (why) {
    failed.push(name);
    console.log("  FAILS   " + name + "\n          " + String(why?.message ?? why).split("\n").slice(0, 6).join("\n          "));
  }
}

export function equal(got, wanted, what = "value") {
  const [a, b] = [JSON.stringify(got), JSON.stringify(wanted)];
  if (a !== b) throw new Error(`${what}: got ${a}, wanted ${b}`);
}

export function truth(value, what) {
  if (!value) throw new Error(what);
}

/** Ends the program: 1 where anything failed. */
export function end() {
  console.log(failed.length ? `${failed.length} failed` : "all hold");
  process.exit(failed.length ? 1 : 0);
}

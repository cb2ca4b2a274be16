// Checks a JSON document: each pair of arguments is an expression over "a", the document, and the value wanted of it as
// text. Prints every difference with the document, and exits with 1 where there is one.
import { readFileSync } from 'node:fs';

const text = readFileSync(0, 'utf8');
const pairs = process.argv.slice(2);
const fail = (message) => {
  console.error(`${message}; the answer was\n${text}`);
  process.exit(1);
};
let a;
try {
  a = JSON.parse(text);
} catch (e) {
  fail(`not JSON: ${e.message}`);
}
if (pairs.length === 0 || pairs.length % 2 !== 0) fail('want.mjs needs pairs of an expression and a value');
const wrong = [];
for (let i = 0; i < pairs.length; i += 2) {
  let got;
  try {
    got = String(new Function('a', `return ${pairs[i]}`)(a));
  } catch (e) {
    got = `(${e.message})`;
  }
  if (got !== pairs[i + 1]) wrong.push(`${pairs[i]}: got ${got}, want ${pairs[i + 1]}`);
}
if (wrong.length > 0) fail(wrong.join('\n'));

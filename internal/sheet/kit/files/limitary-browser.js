// Title: A script for a browser-based spreadsheet program: judge the selected cells, post them, fetch the limits
// Install: In a program of the Google Sheets kind: Extensions, Apps Script; paste this text, save, and open the spreadsheet
//   again, which then has a menu Limitary. Its first use asks for permission. Cells named limitary_base (address of the
//   service), limitary_chart, limitary_source and limitary_lot (Data, Named ranges) say what would otherwise
//   be asked for.
// Limits: The script runs on the machines of the program's maker: the service must be reachable from there, over HTTPS, and
//   what is sent passes there. Where that is not wanted, do not install it. 10,000 rows at once. A post is all or nothing,
//   and safe to repeat. Dates in cells are sent in the zone of the spreadsheet with their offset. The key is kept in the
//   user's own properties of this script, never in a cell; Forget the key removes it. It is sent to the address it was
//   given for and to no other.
// Run here: not run here; no such program was at hand
const SERVICE = "http://127.0.0.1:7410";
const ROWS_MAX = 10000;
const LIMITS_SHEET = "limitary_limits";
const ADDED = "limitary_";
const ADDED_MAX = 6;
// The columns of the table of limits that hold text; all others hold numbers.
const TEXT_COLUMNS = ["chart", "title", "lot", "unit", "kind", "track_state", "effective_from", "provisional", "rules", "dispersion_rules"];

function onOpen() {
  SpreadsheetApp.getUi().createMenu("Limitary")
    .addItem("Judge the selection", "limitaryJudge")
    .addItem("Post the selection", "limitaryPost")
    .addItem("Fetch the limits", "limitaryFetchLimits")
    .addItem("Forget the key", "limitaryForgetKey")
    .addToUi();
}

function limitaryJudge() { tell(judgeSelection_); }
function limitaryPost() { tell(postSelection_); }
function limitaryFetchLimits() { tell(fetchLimits_); }
function limitaryForgetKey() { PropertiesService.getUserProperties().deleteProperty(keyName_(base_())); }

function tell(job) {
  try {
    job();
  } catch (e) {
    SpreadsheetApp.getUi().alert("Limitary", String(e.message || e), SpreadsheetApp.getUi().ButtonSet.OK);
  }
}

function judgeSelection_() {
  const block = selected_();
  clearAdded_(block);
  const query = { delimiter: "tab", decimal: "point" };
  if (!hasHeader_(block)) query.header = "no";
  const lot = setting_("lot");
  if (lot) query.lot = lot;
  send_(block, "/sheet/judge/" + encodeURIComponent(setting_("chart", "Judge against which chart?")), query, 2);
}

function postSelection_() {
  const block = selected_();
  if (!hasHeader_(block)) throw new Error("The first row of what is posted must name the columns: id, time, value.");
  clearAdded_(block);
  const names = block.getDisplayValues()[0].map((s) => s.trim().toLowerCase());
  const query = { delimiter: "tab", decimal: "point" };
  const chart = setting_("chart", "Post to which chart?");
  if (!names.includes("source")) query.source = setting_("source", "Where do the results come from? Always give the same for the same sheet.");
  const lot = setting_("lot");
  if (lot && !names.includes("lot")) query.lot = lot;
  send_(block, "/sheet/results/" + encodeURIComponent(chart), query, 3);
}

function fetchLimits_() {
  const rows = parse_(request_("get", "/sheet/limits.tsv", { decimal: "point" }));
  const book = SpreadsheetApp.getActiveSpreadsheet();
  const sheet = book.getSheetByName(LIMITS_SHEET) || book.insertSheet(LIMITS_SHEET);
  sheet.clearContents();
  const now = new Date().toISOString();
  const table = rows.map((row, i) => row.map((text, k) => typed_(text, i > 0 && !TEXT_COLUMNS.includes(rows[0][k]))).concat(i === 0 ? ADDED + "fetched_at" : now));
  write_(sheet.getRange(1, 1, table.length, table[0].length), table);
}

// setting_ is what the cell named limitary_NAME says; else the answer to the question, if there is one.
function setting_(name, question) {
  const cell = SpreadsheetApp.getActiveSpreadsheet().getRangeByName(ADDED + name);
  if (cell) return cell.getDisplayValues()[0][0].trim();
  return question ? ask_(question) : "";
}

function ask_(question) {
  const ui = SpreadsheetApp.getUi();
  const given = ui.prompt("Limitary", question, ui.ButtonSet.OK_CANCEL);
  const text = given.getResponseText().trim();
  if (given.getSelectedButton() !== ui.Button.OK || !text) throw new Error("Nothing was sent.");
  return text;
}

function base_() { return (setting_("base") || SERVICE).replace(/\/+$/, ""); }

function keyName_(base) { return "limitary key of " + base; }

function key_(base) {
  const kept = PropertiesService.getUserProperties();
  let key = kept.getProperty(keyName_(base));
  if (!key) {
    key = ask_("The key for " + base + ". It is kept for you alone and sent nowhere else.");
    kept.setProperty(keyName_(base), key);
  }
  return key;
}

function request_(method, path, query, body) {
  const base = base_();
  const options = { method: method, headers: { Authorization: "Bearer " + key_(base) }, muteHttpExceptions: true, followRedirects: false };
  if (body !== undefined) Object.assign(options, { payload: body, contentType: "text/tab-separated-values; charset=utf-8" });
  const pairs = Object.keys(query).map((name) => name + "=" + encodeURIComponent(query[name]));
  const response = UrlFetchApp.fetch(base + path + "?" + pairs.join("&"), options);
  if (response.getResponseCode() !== 200) {
    throw new Error("The service refused (" + response.getResponseCode() + "): " + response.getContentText());
  }
  return response.getContentText();
}

// selected_ is the selected block: one rectangle, without the empty rows below and without columns that an earlier answer added.
function selected_() {
  const list = SpreadsheetApp.getActiveSpreadsheet().getActiveRangeList();
  if (!list || list.getRanges().length !== 1) throw new Error("Select one rectangle of cells.");
  const chosen = list.getRanges()[0];
  const shown = chosen.getDisplayValues();
  let wide = shown[0].length;
  while (wide > 1 && shown[0][wide - 1].startsWith(ADDED)) wide--;
  let high = shown.length;
  while (high > 0 && shown[high - 1].slice(0, wide).every((s) => s === "")) high--;
  if (high === 0) throw new Error("The selected cells are empty.");
  if (high > ROWS_MAX + 1) throw new Error("More than " + ROWS_MAX + " rows are selected, which is the limit; send them in parts.");
  return chosen.offset(0, 0, high, wide);
}

// A bound such as <0.5, or a number kept as text, is no column's name.
function hasHeader_(block) {
  return block.getValues()[0].some((v) => typeof v === "string" && v.trim() !== "" && !plain_(v.trim().replace(/^[<>]\s*/, "").replace(",", ".")));
}

// clearAdded_ takes an earlier answer away, so that an old verdict never stands beside a new value, and makes sure of room.
function clearAdded_(block) {
  const right = block.offset(0, block.getNumColumns(), block.getNumRows(), ADDED_MAX);
  const first = right.getDisplayValues()[0];
  for (let k = 0; k < ADDED_MAX && first[k].startsWith(ADDED); k++) right.offset(0, k, right.getNumRows(), 1).clearContent();
  if (right.getDisplayValues().some((row) => row.some((s) => s !== ""))) {
    throw new Error("The answer needs the " + ADDED_MAX + " columns right of the selection, and there is something in them. Nothing was sent.");
  }
}

// send_ sends the block and writes the columns that the answer adds beside it; the one at versionAt holds numbers.
function send_(block, path, query, versionAt) {
  const rows = parse_(request_("post", path, query, blockText_(block)));
  if (rows.length !== block.getNumRows()) {
    throw new Error("The answer has " + rows.length + " rows, " + block.getNumRows() + " were sent; it was not written.");
  }
  const wide = block.getNumColumns();
  const added = rows.map((row) => row.slice(wide).map((text, k) => typed_(text, k === versionAt)));
  write_(block.offset(0, wide, added.length, added[0].length), added);
}

// write_ writes texts as texts, never as formulas.
function write_(range, rows) {
  range.setNumberFormats(rows.map((row) => row.map((v) => (typeof v === "number" ? "General" : "@"))));
  range.setValues(rows);
}

function typed_(text, asNumber) { return asNumber && plain_(text) ? Number(text) : text; }

// plain_ is true of digits with at most one point and a minus before them.
function plain_(text) { return /^-?(\d+\.?\d*|\.\d+)$/.test(text); }

// blockText_ writes the block as text separated by tabs, numbers with a decimal point whatever the locale.
function blockText_(block) {
  const values = block.getValues(), shown = block.getDisplayValues();
  const zone = SpreadsheetApp.getActiveSpreadsheet().getSpreadsheetTimeZone();
  return values.map((row, i) => row.map((v, k) => {
    if (shown[i][k].startsWith("#")) throw new Error("Row " + (i + 1) + " of the selection holds an error. Nothing was sent.");
    return '"' + cellText_(v, shown[i][k], zone).replace(/"/g, '""') + '"';
  }).join("\t") + "\n").join("");
}

function cellText_(value, shown, zone) {
  if (value instanceof Date) return Utilities.formatDate(value, zone, "yyyy-MM-dd'T'HH:mm:ssXXX");
  if (typeof value !== "number") return String(value);
  // A number as its cell shows it, which keeps zeros at its end, where that is the whole number; else with all its digits.
  const text = shown.trim().replace(",", ".");
  return plain_(text) && Number(text) === value ? text : String(value);
}

// parse_ takes text separated by tabs apart: rows of cells.
function parse_(text) {
  const rows = [];
  let row = [], cell = "", quoted = false;
  for (let i = 0; i < text.length; i++) {
    const c = text[i];
    if (quoted && c === '"' && text[i + 1] === '"') {
      cell += c;
      i++;
    } else if (quoted && c === '"') {
      quoted = false;
    } else if (quoted) {
      cell += c;
    } else if (c === '"' && cell === "") {
      quoted = true;
    } else if (c === "\t" || c === "\n") {
      row.push(cell);
      cell = "";
      if (c === "\n") {
        rows.push(row);
        row = [];
      }
    } else if (c !== "\r") {
      cell += c;
    }
  }
  return rows;
}

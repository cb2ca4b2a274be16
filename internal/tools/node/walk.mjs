// Walks the main job over gRPC with a client that shares no code with the service: the contract is read from proto/ as it
// stands. Called by internal/tools/walk with the address of a running service and the folder of the contract; the tokens
// of four principals come in the environment. Every answer is checked; it exits with 1 at the first that is not as wanted.
import assert from 'node:assert/strict';
import { readdirSync } from 'node:fs';
import { join } from 'node:path';
import grpc from '@grpc/grpc-js';
import loader from '@grpc/proto-loader';

const [address, protoDir] = process.argv.slice(2);
const files = readdirSync(join(protoDir, 'limitary/v1')).filter((f) => f.endsWith('.proto')).map((f) => `limitary/v1/${f}`);
const options = { includeDirs: [protoDir], keepCase: false, longs: String, enums: String, defaults: true, oneofs: true };
const { limitary } = grpc.loadPackageDefinition(loader.loadSync(files, options));

// What a refusal carries, as google/rpc/status.proto and error_details.proto have it.
const rpc = loader.fromJSON({ nested: { rpc: { nested: {
  Any: { fields: { typeUrl: { type: 'string', id: 1 }, value: { type: 'bytes', id: 2 } } },
  Status: { fields: { code: { type: 'int32', id: 1 }, message: { type: 'string', id: 2 }, details: { rule: 'repeated', type: 'Any', id: 3 } } },
  ErrorInfo: { fields: { reason: { type: 'string', id: 1 }, domain: { type: 'string', id: 2 } } },
} } } });

const tokens = {
  author: process.env.LIMITARY_AUTHOR, approver: process.env.LIMITARY_APPROVER,
  poster: process.env.LIMITARY_POSTER, reviewer: process.env.LIMITARY_REVIEWER,
};
const clients = Object.fromEntries(['Chart', 'Limit', 'Evaluation', 'Signal', 'Rule']
  .map((name) => [name, new limitary.v1[`${name}Service`](address, grpc.credentials.createInsecure())]));
const deadlineMillis = 60_000;
let calls = 0;
let doing = '';

// call gives the answer of a method, or throws grpc's error.
function call(who, method, request) {
  const [service, name] = method.split('.');
  doing = `${method} as ${who}, call ${++calls}`;
  const metadata = new grpc.Metadata();
  metadata.set('authorization', `Bearer ${tokens[who]}`);
  return new Promise((resolve, reject) => {
    clients[service][name](request, metadata, { deadline: Date.now() + deadlineMillis }, (err, answer) => (err ? reject(err) : resolve(answer)));
  });
}

// refused wants a refusal with a code and a reason.
async function refused(code, reason, who, method, request) {
  let answer;
  try {
    answer = await call(who, method, request);
  } catch (err) {
    assert.equal(grpc.status[err.code], code, `code; ${err.message}`);
    const [bytes] = err.metadata.get('grpc-status-details-bin');
    const infos = rpc['rpc.Status'].deserialize(bytes).details.filter((d) => d.typeUrl.endsWith('/google.rpc.ErrorInfo'))
      .map((d) => rpc['rpc.ErrorInfo'].deserialize(d.value));
    assert.deepEqual(infos.map((i) => `${i.domain} ${i.reason}`), [`limitary ERROR_REASON_${reason}`], err.message);
    return;
  }
  assert.fail(`it was answered, want ${code} ${reason}: ${JSON.stringify(answer)}`);
}

const chart = 'walk-node';
const moment = (text) => ({ seconds: Date.parse(text) / 1000 });
const result = (id, day, reading) => ({ chart, source: 'lims', sourceId: id, measuredAt: `2026-03-${day}T09:00:00+01:00`, readings: [reading], unit: 'ug/L', runId: `run-${day}` });
const post = (...results) => call('poster', 'Evaluation.PostResults', { results });
const outcomes = (answer) => answer.results.map((r) => r.outcome.replace('POST_OUTCOME_', '')).join(' ');
const standings = (list) => list.map((r) => `${r.result.sourceId} ${r.verdict.standing.replace('STANDING_', '')}`).join(', ');
const listed = async () => standings((await call('reviewer', 'Evaluation.ListResults', { chart, pageSize: 100 })).results);
const track = async () => (await call('reviewer', 'Chart.ListTracks', { chart })).tracks[0];

// limits defines the chart and puts a version of centre 10 and sigma 1 in force: lines at 7 and 13.
async function limits() {
  const made = await call('author', 'Chart.CreateChart', { requestId: 'n1', chart: { name: chart, kind: 'CHART_KIND_INDIVIDUALS', subgroupSize: 1, unit: 'ug/L', labels: { walk: 'node' } } });
  assert.equal(made.chart.name, chart);
  await refused('ALREADY_EXISTS', 'ALREADY_EXISTS', 'author', 'Chart.CreateChart', { requestId: 'n2', chart: { ...made.chart, unit: '1' } });
  await refused('PERMISSION_DENIED', 'ROLE_MISSING', 'reviewer', 'Limit.ProposeVersion', { chart, requestId: 'n3' });
  const proposal = {
    chart, centre: 10, processSigma: 1, publishedDecimals: 2, locationRules: { ruleSet: 'nelson-1984' },
    effectiveFrom: moment('2026-03-01T00:00:00Z'), reason: 'certified value', instructions: { stop: 'Stop the run.' },
  };
  // The set holds patterns for setting a chart up; who keeps them in monitoring must say so.
  await refused('FAILED_PRECONDITION', 'CAUTION_NOT_ACCEPTED', 'author', 'Limit.ProposeVersion', { ...proposal, requestId: 'n4' });
  const proposed = await call('author', 'Limit.ProposeVersion', { ...proposal, requestId: 'n5', acceptedCautions: ['SETUP_PATTERN_IN_MONITORING'] });
  assert.equal(proposed.version.state, 'VERSION_STATE_PROPOSED');
  const { version } = await call('approver', 'Limit.GetVersion', { chart, version: 1 });
  assert.deepEqual([version.location.centre, version.location.lowerAction.value, version.location.upperAction.value], [10, 7, 13]);
  assert.match(version.digest, /^[0-9a-f]{64}$/);
  const approval = { chart, version: 1, digest: version.digest };
  await refused('FAILED_PRECONDITION', 'DIGEST_MISMATCH', 'approver', 'Limit.ApproveVersion', { ...approval, requestId: 'n6', digest: '0'.repeat(64) });
  const approved = await call('approver', 'Limit.ApproveVersion', { ...approval, requestId: 'n7' });
  assert.equal(approved.version.state, 'VERSION_STATE_APPROVED');
  assert.equal(approved.version.decidedBy, 'approver');
  await refused('FAILED_PRECONDITION', 'WRONG_STATE', 'approver', 'Limit.RejectVersion', { chart, version: 1, requestId: 'n8', reason: 'late' });
}

// results posts a STOP, and the same twice, with other content, late, and wrong in every way a row can be.
async function results() {
  const first = await post(result('n1', '02', '10.4'), result('n2', '03', '13.5'), result('n3', '05', '9.8'));
  assert.equal(outcomes(first), 'ACCEPTED ACCEPTED ACCEPTED');
  assert.deepEqual(first.results.map((r) => [r.verdict.standing, r.verdict.version]), [['STANDING_CLEAR', 1], ['STANDING_STOP', 1], ['STANDING_CLEAR', 1]]);
  assert.equal(first.results[1].verdict.instruction, 'Stop the run.');
  assert.equal(first.tracks[0].state, 'TRACK_STATE_HOLD');
  assert.deepEqual(first.tracks[0].signals.map((s) => [s.change, s.rule, s.side]), [['SIGNAL_CHANGE_OPENED', 'nelson-1984/1', 'SIDE_UPPER']]);
  const again = await post(result('n2', '03', '13.5'));
  assert.equal(outcomes(again), 'DUPLICATE');
  assert.equal(again.results[0].verdict.standing, 'STANDING_STOP');
  assert.equal(again.results[0].currentVerdict.standing, 'STANDING_STOP');
  const other = await post(result('n2', '03', '11.5'));
  assert.equal(outcomes(other), 'CONFLICT');
  assert.deepEqual(other.results[0].stored.readings, ['13.5']);
  // On the line is not beyond it; a late result has its place by when it was measured.
  assert.equal(outcomes(await post(result('n4', '04', '13.0'))), 'ACCEPTED');
  const wrong = await post({ ...result('w1', '06', '10'), unit: 'mg/L' }, { ...result('w2', '06', '10'), measuredAt: '2026-03-06T09:00:00' },
    { ...result('w3', '06', '10'), readings: ['10', '11'] }, { ...result('w4', '06', '10'), chart: 'walk-nosuch' });
  assert.deepEqual(wrong.results.map((r) => r.reason.replace('ERROR_REASON_', '')), ['WRONG_UNIT', 'TIME_WITHOUT_OFFSET', 'WRONG_READING_COUNT', 'NOT_FOUND']);
  assert.equal(outcomes(wrong), 'REFUSED REFUSED REFUSED REFUSED');
  // n4 lies beyond two sigma beside n2: two of three. It lies on the action line, which is no STOP.
  assert.equal(await listed(), 'n1 CLEAR, n2 STOP, n4 ACT, n3 CLEAR');
  const run = await call('reviewer', 'Evaluation.GetRun', { runId: 'run-03' });
  assert.deepEqual(run.results.map((r) => r.result.chart), [chart]);
  assert.equal(run.standing, 'STANDING_STOP');
}

// explanation reads why, and judges a value that is not stored.
async function explanation() {
  const why = await call('reviewer', 'Evaluation.ExplainVerdict', { chart, source: 'lims', sourceId: 'n4' });
  const hit = why.rules.find((r) => r.completed && r.rule === 'nelson-1984/5');
  assert.deepEqual(hit.window.map((p) => [p.result.sourceId, p.statistic, p.counts]), [['n1', 10.4, false], ['n2', 13.5, true], ['n4', 13, true]]);
  assert.match(why.safety, /not a compliance, release or safety decision/);
  const judged = await call('reviewer', 'Evaluation.EvaluateBatch', { detail: 'DETAIL_FULL', evaluations: [{ chart: { name: chart, at: moment('2026-03-10T00:00:00Z') }, series: { values: [10, NaN, 6.99] } }] });
  assert.deepEqual(judged.evaluations[0].verdicts.map((v) => v.standing), ['STANDING_CLEAR', 'STANDING_NOT_JUDGED', 'STANDING_STOP']);
  assert.equal(judged.evaluations[0].version, 1);
}

// decisions notes and closes the occurrence, as it was seen and not otherwise, and releases the track.
async function decisions() {
  const open = await call('reviewer', 'Signal.QuerySignals', { labels: ['walk=node'], statuses: ['SIGNAL_STATUS_OPEN'] });
  assert.deepEqual(open.signals.map((s) => `${s.rule} ${s.side} ${s.firstHit.sourceId}`).sort(), ['nelson-1984/1 SIDE_UPPER n2', 'nelson-1984/5 SIDE_UPPER n4']);
  const [{ occurrence }] = open.signals;
  assert.deepEqual(open.signals.map((s) => s.occurrence), [occurrence, occurrence]);
  const ids = open.signals.map((s) => s.id);
  await call('reviewer', 'Signal.NoteSignal', { signal: ids[0], requestId: 'n10', text: 'The eluent was changed.' });
  const decision = { occurrence, decision: 'ASSIGNABLE_CAUSE', cause: 'wrong eluent' };
  await refused('PERMISSION_DENIED', 'ROLE_MISSING', 'poster', 'Signal.CloseOccurrence', { ...decision, requestId: 'n11', signals: ids });
  await refused('FAILED_PRECONDITION', 'WRONG_STATE', 'reviewer', 'Signal.CloseOccurrence', { ...decision, requestId: 'n12', signals: ids.slice(1) });
  const closed = await call('reviewer', 'Signal.CloseOccurrence', { ...decision, requestId: 'n13', signals: ids });
  assert.deepEqual(closed.signals.map((s) => [s.status, s.closedBy, s.cause]), ids.map(() => ['SIGNAL_STATUS_CLOSED', 'reviewer', 'wrong eluent']));
  // Neither a decision on the signals nor a good point ends the hold.
  assert.equal(outcomes(await post(result('n5', '06', '10.1'))), 'ACCEPTED');
  const held = await track();
  assert.deepEqual([held.state, held.openSignals, held.version], ['TRACK_STATE_HOLD', 0, 1]);
  const release = { chart, reason: 'new eluent, checked' };
  await refused('ABORTED', 'REVISION_MISMATCH', 'reviewer', 'Signal.ReleaseTrack', { ...release, requestId: 'n14', holdSince: moment('2026-03-03T00:00:00Z') });
  const released = await call('reviewer', 'Signal.ReleaseTrack', { ...release, requestId: 'n15', holdSince: held.holdSince });
  assert.equal(released.track.state, 'TRACK_STATE_CLEAR');
  const { signal, notes, events } = await call('reviewer', 'Signal.GetSignal', { signal: ids[0] });
  assert.deepEqual([signal.status, signal.decision, notes.map((n) => n.text)], ['SIGNAL_STATUS_CLOSED', 'ASSIGNABLE_CAUSE', ['The eluent was changed.']]);
  assert.deepEqual(events.map((e) => e.status), ['SIGNAL_STATUS_OPEN', 'SIGNAL_STATUS_CLOSED']);
}

// changes asks for a correction that takes the STOP back, which another person confirms.
async function changes() {
  const amendment = { result: result('n2', '03', '11.5'), requestId: 'n20', expectedRevision: 1, reasonCode: 'TYPO', reason: '13.5 for 11.5' };
  const asked = await call('poster', 'Evaluation.AmendResult', amendment);
  assert.equal(asked.request.status, 'CHANGE_STATUS_PENDING');
  assert.equal(asked.result, null);
  assert.equal((await call('poster', 'Evaluation.AmendResult', amendment)).request.id, asked.request.id);
  await refused('ALREADY_EXISTS', 'REQUEST_ID_REUSED', 'poster', 'Evaluation.AmendResult', { ...amendment, reason: 'another' });
  const decision = { change: asked.request.id, decision: 'DECISION_CONFIRM', reason: 'seen' };
  await refused('PERMISSION_DENIED', 'SAME_PRINCIPAL', 'poster', 'Evaluation.ConfirmRequest', { ...decision, requestId: 'n21' });
  assert.equal(await listed(), 'n1 CLEAR, n2 STOP, n4 ACT, n3 CLEAR, n5 CLEAR');
  const confirmed = await call('approver', 'Evaluation.ConfirmRequest', { ...decision, requestId: 'n22' });
  assert.equal(confirmed.request.status, 'CHANGE_STATUS_CONFIRMED');
  assert.equal(await listed(), 'n1 CLEAR, n2 CLEAR, n4 CLEAR, n3 CLEAR, n5 CLEAR');
  const gone = await call('reviewer', 'Signal.QuerySignals', { chart, statuses: ['SIGNAL_STATUS_RETRACTED'], changedAfterClosing: true });
  assert.deepEqual(gone.signals.map((s) => s.rule).sort(), ['nelson-1984/1', 'nelson-1984/5']);
  const { revisions } = await call('reviewer', 'Evaluation.GetResult', { chart, source: 'lims', sourceId: 'n2' });
  assert.deepEqual(revisions.map((r) => [r.revision, r.result.readings[0], r.author, r.confirmedBy]), [[1, '13.5', 'poster', ''], [2, '11.5', 'poster', 'approver']]);
}

try {
  for (const part of [limits, results, explanation, decisions, changes]) await part();
  const { ruleSets } = await call('reviewer', 'Rule.ListRules', {});
  assert.ok(ruleSets.some((s) => s.id === 'nelson-1984'), 'nelson-1984 is in the catalogue');
  console.log(`walk: Node's gRPC library: ${calls} calls answered as wanted`);
} catch (err) {
  console.error(`walk.mjs: ${doing}: ${err.message}`);
  process.exitCode = 1;
} finally {
  Object.values(clients).forEach((c) => c.close());
}

// Walks the main job over gRPC with a client that is not Go: chart, set-up results, proposal, approval by another
// principal, a result far out, its signal, its explanation, closing and release. Prints what it saw as JSON.
// Arguments: address, folder of the .proto files, package.json of the client libraries. Tokens: the variable TOKENS.
import { createRequire } from 'node:module'

const [address, protos, libraries] = process.argv.slice(2)
const require = createRequire(libraries)
const grpc = require('@grpc/grpc-js')
const loader = require('@grpc/proto-loader')

const files = ['chart', 'version', 'result', 'signal'].map((name) => `limitary/v1/${name}.proto`)
const { limitary: { v1 } } = grpc.loadPackageDefinition(
  loader.loadSync(files, { includeDirs: [protos], longs: String, enums: String, defaults: true }))
const tokens = JSON.parse(process.env.TOKENS)
const clients = {}

function call (service, method, as, request) {
  clients[service] ??= new v1[service](address, grpc.credentials.createInsecure())
  const metadata = new grpc.Metadata()
  metadata.set('authorization', `Bearer ${tokens[as]}`)
  return new Promise((resolve, reject) => {
    clients[service][method](request, metadata, { deadline: Date.now() + 60000 }, (err, answer) => err ? reject(err) : resolve(answer))
  })
}

const time = (text) => ({ seconds: Math.floor(Date.parse(text) / 1000), nanos: 0 })
const result = (day, reading) => ({
  chart: 'nitrate', source: 'node', sourceId: `n${day}`, measuredAt: `2020-01-${String(day).padStart(2, '0')}T08:00:00+01:00`, readings: [reading]
})
const seen = {}

await call('ChartService', 'CreateChart', 'author', {
  requestId: 'c', chart: { name: 'nitrate', kind: 'CHART_KIND_INDIVIDUALS', subgroupSize: 1, unit: 'mg/L' }
})
const setUp = ['10.0', '10.2', '9.9', '10.1', '9.8', '10.0', '10.3', '9.9', '10.1', '9.9'].map((reading, i) => result(i + 1, reading))
const first = await call('EvaluationService', 'PostResults', 'poster', { results: setUp })
seen.setUp = first.results.map((r) => r.outcome)
const { version: proposed } = await call('LimitService', 'ProposeVersion', 'author', {
  requestId: 'p', chart: 'nitrate', stored: { from: time('2020-01-01T00:00:00Z'), to: time('2020-01-11T00:00:00Z') },
  locationRules: { ruleSet: 'western-electric-1956' }, effectiveFrom: time('2020-01-12T00:00:00Z'), reason: 'set-up'
})
seen.processSigma = proposed.processSigma
seen.refused = await call('LimitService', 'ApproveVersion', 'author', { chart: 'nitrate', version: 1, requestId: 'a0', digest: proposed.digest })
  .then(() => 'approved', (err) => grpc.status[err.code])
const { version } = await call('LimitService', 'ApproveVersion', 'approver', { chart: 'nitrate', version: 1, requestId: 'a', digest: proposed.digest })
seen.state = version.state
const post = { results: [result(13, '10.1'), result(14, '13.5')] }
const posted = await call('EvaluationService', 'PostResults', 'poster', post)
seen.standings = posted.results.map((r) => r.verdict.standing)
seen.again = (await call('EvaluationService', 'PostResults', 'poster', post)).results.map((r) => r.outcome)
const { signals } = await call('SignalService', 'QuerySignals', 'reader', { statuses: ['SIGNAL_STATUS_OPEN'] })
seen.signals = signals.map((s) => [s.rule, s.side, s.lastHit.sourceId])
const explained = await call('EvaluationService', 'ExplainVerdict', 'reader', { chart: 'nitrate', source: 'node', sourceId: 'n14' })
seen.completed = explained.rules.filter((r) => r.completed).map((r) => r.rule)
seen.sentences = explained.arithmetic.length
const closed = await call('SignalService', 'CloseOccurrence', 'reviewer', {
  occurrence: signals[0].occurrence, requestId: 'o', decision: 'ASSIGNABLE_CAUSE', cause: 'bubble', signals: signals.map((s) => s.id)
})
seen.held = closed.track.state
const released = await call('SignalService', 'ReleaseTrack', 'reviewer', {
  chart: 'nitrate', requestId: 'r', reason: 'cell cleaned', holdSince: closed.track.holdSince
})
seen.released = released.track.state
console.log(JSON.stringify(seen))
Object.values(clients).forEach((c) => c.close())

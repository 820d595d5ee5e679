/** The arrows of the house: control imports nothing of ours, features flow one way, the simulator stays independent. */
export default {
  forbidden: [
    {
      name: 'control-imports-nothing-of-ours',
      severity: 'error',
      from: { path: '^service/src/control/' },
      to: { path: '^(service|simulator|ui)/', pathNot: '^service/src/control/' },
    },
    {
      name: 'pure-parts-know-no-framework',
      comment: 'Identification and the drift chart are mathematics: no Nest, no database, no I/O.',
      severity: 'error',
      from: { path: '^service/src/(control|identification|drift)/' },
      to: { path: '(@nestjs|typeorm|better-sqlite3|^node:|^fs$|socket\\.io)' },
    },
    {
      name: 'simulator-is-independent',
      severity: 'error',
      from: { path: '^simulator/' },
      to: { path: '^(service/src|ui)/', pathNot: 'frame-codec' },
    },
    {
      name: 'page-knows-the-service-by-its-api-only',
      severity: 'error',
      from: { path: '^ui/' },
      to: { path: '^(service|simulator)/' },
    },
    {
      name: 'page-shared-code-knows-no-feature',
      severity: 'error',
      from: { path: '^ui/src/(api|charts|components|theme)/' },
      to: { path: '^ui/src/(features|app)/' },
    },
    {
      name: 'page-features-do-not-know-the-app',
      severity: 'error',
      from: { path: '^ui/src/features/' },
      to: { path: '^ui/src/app/' },
    },
    {
      name: 'no-circles',
      severity: 'error',
      from: { path: '^(ui/src|simulator/src|service/src/(control|identification|drift|indicators))' },
      to: { circular: true, dependencyTypesNot: ['type-only'] },
    },
  ],
  options: {
    doNotFollow: { path: 'node_modules' },
    exclude: { path: '(\\.test\\.tsx?$|/dist/)' },
    tsPreCompilationDeps: true,
    tsConfig: { fileName: 'tsconfig.base.json' },
    enhancedResolveOptions: {
      extensions: ['.ts', '.tsx', '.js', '.json', '.css'],
      exportsFields: ['exports'],
      conditionNames: ['import', 'require', 'node', 'default', 'types'],
    },
  },
};

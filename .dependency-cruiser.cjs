/** The arrows of lib/: app -> components and lib/market -> engines -> geometry. See DEVELOPERS.md. */
const PURE = "^lib/(geometry|vision|proposals|consensus|quality|formats|desk|ledger)/";

module.exports = {
  forbidden: [
    {
      name: "no-circular",
      severity: "error",
      from: {},
      to: { circular: true, viaOnly: { dependencyTypesNot: ["type-only"] } },
    },
    {
      name: "pure-parts-stay-pure",
      severity: "error",
      from: { path: PURE },
      to: {
        path: "^(db|app|components|fakes)/|^lib/(services|market|jobs|auth|http|env|log)|node_modules/(next|react|react-dom|next-auth|stripe|@aws-sdk|drizzle-orm|better-sqlite3)/",
      },
    },
    {
      name: "geometry-knows-numbers-only",
      severity: "error",
      from: { path: "^lib/geometry/" },
      to: { path: "^lib/(?!geometry/|errors)" },
    },
    {
      name: "ledger-stands-alone",
      severity: "error",
      from: { path: "^lib/ledger/" },
      to: { path: "^lib/(?!ledger/|errors)" },
    },
    {
      name: "consensus-and-proposals-do-not-meet",
      severity: "error",
      from: { path: "^lib/(consensus|quality)/" },
      to: { path: "^lib/(proposals|vision|desk|formats|contracts)/" },
    },
    {
      name: "proposals-below-consensus",
      severity: "error",
      from: { path: "^lib/(proposals|vision)/" },
      to: { path: "^lib/(consensus|desk|formats|contracts)/" },
    },
    {
      name: "lib-below-app",
      severity: "error",
      from: { path: "^(lib|db)/" },
      to: { path: "^(app|components)/" },
    },
    {
      name: "components-below-app",
      severity: "error",
      from: { path: "^components/" },
      to: { path: "^(app|db|lib/(services|market|jobs))/", dependencyTypesNot: ["type-only"] },
    },
    {
      name: "fakes-import-nothing",
      severity: "error",
      from: { path: "^fakes/" },
      to: { path: "^(app|components|lib|db|tests)/" },
    },
    {
      name: "fakes-only-for-tests-and-start",
      severity: "error",
      from: { pathNot: "^(fakes|tests)/" },
      to: { path: "^fakes/" },
    },
    {
      name: "sql-lives-in-db",
      severity: "error",
      from: { pathNot: "^(db|tests|fakes|drizzle[.]config|lib/(market|jobs|cli|auth/tokens))" },
      to: { path: "node_modules/(drizzle-orm|better-sqlite3)/" },
    },
  ],
  options: {
    tsConfig: { fileName: "tsconfig.json" },
    tsPreCompilationDeps: true,
    doNotFollow: { path: "node_modules" },
    exclude: { path: "^(\\.next|\\.demo|coverage)/" },
    enhancedResolveOptions: { extensions: [".ts", ".tsx", ".mjs", ".js", ".json"] },
  },
};

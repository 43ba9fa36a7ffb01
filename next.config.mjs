process.env.NEXT_TELEMETRY_DISABLED = "1";

const isDevelopment = process.env.NODE_ENV === "development";

// Pictures go between the browser and S3 directly. A production build writes these headers into its manifest,
// so S3_ENDPOINT must be set when it is built for a host other than this machine; the demo's stand-ins
// listen on loopback, on ports that may be moved.
const loopback = "http://127.0.0.1:* http://localhost:*";
const store = [loopback, originOf(process.env.S3_ENDPOINT)].filter(Boolean).join(" ");
const hostedPayment = `${loopback} https://checkout.stripe.com https://connect.stripe.com`;

// Next writes inline scripts into pages that are rendered ahead of time, for which a nonce cannot exist; hence
// 'unsafe-inline'. Markdown of users is sanitised before it is rendered and never passes through innerHTML.
const contentSecurityPolicy = [
  ["default-src", "'self'"],
  ["script-src", "'self' 'unsafe-inline' 'wasm-unsafe-eval'", isDevelopment ? "'unsafe-eval'" : ""],
  ["style-src", "'self' 'unsafe-inline'"],
  ["img-src", "'self' blob: data:", store],
  ["font-src", "'self'"],
  ["connect-src", "'self' blob: data:", store, isDevelopment ? "ws://127.0.0.1:* ws://localhost:*" : ""],
  ["worker-src", "'self' blob:"],
  ["frame-src", "'self' blob:", loopback],
  ["form-action", "'self'", hostedPayment],
  ["object-src", "'none'"],
  ["base-uri", "'self'"],
  ["frame-ancestors", "'none'"],
]
  .map((directive) => directive.filter(Boolean).join(" "))
  .join("; ");

const securityHeaders = [
  { key: "Content-Security-Policy", value: contentSecurityPolicy },
  { key: "X-Content-Type-Options", value: "nosniff" },
  { key: "X-Frame-Options", value: "DENY" },
  { key: "Referrer-Policy", value: "strict-origin-when-cross-origin" },
  { key: "Permissions-Policy", value: "camera=(), microphone=(), geolocation=(), payment=(), usb=()" },
  { key: "Cross-Origin-Opener-Policy", value: "same-origin" },
];

/** @type {import("next").NextConfig} */
const nextConfig = {
  // A second build beside a running one (tests beside the demo) names its own folder.
  distDir: process.env.NEXT_DIST_DIR ?? ".next",
  poweredByHeader: false,
  typedRoutes: false,
  reactStrictMode: true,
  // Types are checked once by `npm run typecheck` (CI runs it), tests and tools included, not again by each build.
  typescript: { ignoreBuildErrors: true },
  turbopack: { root: import.meta.dirname },
  serverExternalPackages: [
    "better-sqlite3",
    "sharp",
    "@node-rs/argon2",
    "piscina",
    "pino",
    "@aws-sdk/client-s3",
    "@aws-sdk/lib-storage",
    "@aws-sdk/s3-request-presigner",
    "stripe",
    "pdf-lib",
    "yazl",
    "yauzl",
    "tsx",
  ],
  headers: async () => [{ source: "/:path*", headers: securityHeaders }],
};

export default nextConfig;

function originOf(url) {
  if (!url) return "";
  const { origin, hostname, protocol } = new URL(url);
  // Virtual-hosted buckets put the bucket's name in front of the endpoint's host.
  return protocol === "https:" ? `${origin} https://*.${hostname}` : origin;
}

import { defineConfig, globalIgnores } from "eslint/config";
import nextVitals from "eslint-config-next/core-web-vitals";
import nextTs from "eslint-config-next/typescript";

export default defineConfig([
  ...nextVitals,
  ...nextTs,
  {
    rules: {
      "@typescript-eslint/no-explicit-any": "error",
      "@typescript-eslint/no-unused-vars": [
        "error",
        { argsIgnorePattern: "^_", varsIgnorePattern: "^_", caughtErrorsIgnorePattern: "^_" },
      ],
      // Signing in and out and going to a payment page want a whole page load, with fresh cookies.
      "@next/next/no-location-assign-relative-destination": "off",
      "import/no-anonymous-default-export": "off", // tools' own configuration files
      "@next/next/no-img-element": "off", // images come from our own store, already in the sizes that are shown
    },
  },
  globalIgnores([".next/**", ".demo/**", "drizzle/**", "coverage/**", "node_modules/**", "public/**"]),
]);

import type { MetadataRoute } from "next";

export default function manifest(): MetadataRoute.Manifest {
  return {
    name: "Merestone",
    short_name: "Merestone",
    description: "Instance labels for images: posted, drawn, agreed, paid and delivered.",
    start_url: "/",
    display: "standalone",
    background_color: "#ecebe4",
    theme_color: "#ecebe4",
    icons: [{ src: "/icon.svg", sizes: "any", type: "image/svg+xml" }],
  };
}

import ReactMarkdown, { type Components } from "react-markdown";
import rehypeSanitize, { defaultSchema } from "rehype-sanitize";
import remarkGfm from "remark-gfm";
import { cn } from "./cn";

type Props = {
  children: string;
  /** Headings start here, so that the page keeps one `h1`. */
  headingFrom?: 2 | 3;
  className?: string;
};

// People write this text and others read it: the default schema lets no script, style or frame through.
const schema = {
  ...defaultSchema,
  protocols: { ...defaultSchema.protocols, src: ["https", "http", "blob"] },
};

/** Text that a person wrote in Markdown (GitHub flavour), sanitised. */
export function Markdown({ children, headingFrom = 3, className }: Props) {
  return (
    <div className={cn("written max-w-prose wrap-anywhere", className)}>
      <ReactMarkdown
        remarkPlugins={[remarkGfm]}
        rehypePlugins={[[rehypeSanitize, schema]]}
        components={headingFrom === 2 ? FROM_TWO : FROM_THREE}
      >
        {children}
      </ReactMarkdown>
    </div>
  );
}

const shared: Components = {
  a: ({ node: _node, ...rest }) => <a {...rest} rel="nofollow noopener noreferrer" target="_blank" />,
  // Examples of a brief come from S3 by short-lived addresses, which an image optimiser could not cache.
  img: ({ node: _node, alt, ...rest }) => <img {...rest} alt={alt ?? ""} loading="lazy" />,
};

const FROM_TWO: Components = {
  ...shared,
  h1: ({ node: _node, ...rest }) => <h2 {...rest} />,
  h2: ({ node: _node, ...rest }) => <h3 {...rest} />,
  h3: ({ node: _node, ...rest }) => <h4 {...rest} />,
};

const FROM_THREE: Components = {
  ...shared,
  h1: ({ node: _node, ...rest }) => <h3 {...rest} />,
  h2: ({ node: _node, ...rest }) => <h4 {...rest} />,
  h3: ({ node: _node, ...rest }) => <h5 {...rest} />,
};

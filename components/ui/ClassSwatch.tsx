import { useId, type ReactNode } from "react";
import { classColour, classPattern, inkOn, type PatternName } from "./classPalette";
import { cn } from "./cn";

type Props = {
  /** The class's number in the key, from 1; it is also the key that draws it. */
  number: number;
  /** `#rrggbb` where the requester chose another colour than the palette's. */
  colour?: string | undefined;
  name?: ReactNode;
  className?: string;
};

/** A class as it stands in the key: number, colour and pattern, with its name if given. */
export function ClassSwatch({ number, colour, name, className }: Props) {
  const hex = colour ?? classColour(number).hex;
  const patternId = useId();
  const ink = inkOn(hex);
  return (
    <span className={cn("inline-flex items-center gap-2 align-middle", className)}>
      <svg viewBox="0 0 34 22" className="h-5.5 w-8.5 shrink-0" role="img" aria-label={`class ${number}`}>
        <defs>
          <ClassPattern id={patternId} pattern={classPattern(number)} ink={ink} />
        </defs>
        <rect x="0.5" y="0.5" width="33" height="21" rx="1.5" fill={hex} />
        <rect
          x="0.5"
          y="0.5"
          width="33"
          height="21"
          rx="1.5"
          fill={`url(#${patternId})`}
          stroke="var(--rule)"
        />
        <rect x="9" y="3.5" width="16" height="15" rx="1" fill={hex} />
        <text
          x="17"
          y="15.6"
          textAnchor="middle"
          fontSize="13"
          fontWeight="700"
          fill={ink}
          style={{ fontFamily: "var(--figures)" }}
        >
          {number}
        </text>
      </svg>
      {name ? <span>{name}</span> : null}
    </span>
  );
}

type PatternProps = { id: string; pattern: PatternName; ink: string; opacity?: number };

/** The `<pattern>` of a class, for `<defs>`; tiles of 6 units, drawn in `ink` over the class's colour. */
export function ClassPattern({ id, pattern, ink, opacity = 0.6 }: PatternProps) {
  return (
    <pattern id={id} width="6" height="6" patternUnits="userSpaceOnUse">
      <g stroke={ink} strokeOpacity={opacity} strokeWidth="1.1" fill="none">
        {DRAWN[pattern]}
      </g>
    </pattern>
  );
}

const rising = <path d="M-1 1 1-1M0 6 6 0M5 7 7 5" />;
const falling = <path d="M5-1 7 1M0 0 6 6M-1 5 1 7" />;

const DRAWN: Record<PatternName, ReactNode> = {
  solid: null,
  rising,
  falling,
  crossed: (
    <>
      {rising}
      {falling}
    </>
  ),
  dots: <path d="M1.5 1.5h.01M4.5 4.5h.01" strokeWidth="2.2" strokeLinecap="round" />,
  level: <path d="M0 1.5h6M0 4.5h6" />,
  upright: <path d="M1.5 0v6M4.5 0v6" />,
  checked: <path d="M0 1.5h3M3 4.5h3" strokeWidth="3" />,
};

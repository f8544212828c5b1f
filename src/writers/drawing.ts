/** A position in points (1/72 inch) from the top left corner: x to the right, y downward. */
export type Point = readonly [x: number, y: number];

/** One thing drawn; lengths in points, colours as #rrggbb. */
export type Mark =
  | {
      readonly kind: "lines";
      /** Each piece is drawn through its points; between pieces is a gap. */
      readonly pieces: readonly (readonly Point[])[];
      readonly colour: string;
      readonly widthPt: number;
      /** Lengths drawn and left out in turn; solid if missing. */
      readonly dashPt?: readonly number[];
    }
  | {
      readonly kind: "dots";
      readonly centres: readonly Point[];
      readonly colour: string;
      readonly radiusPt: number;
    }
  | {
      readonly kind: "text";
      readonly text: string;
      /** Where the baseline starts, is centred, or ends. */
      readonly at: Point;
      readonly anchor: "start" | "middle" | "end";
      readonly sizePt: number;
      readonly colour: string;
      readonly isBold?: boolean;
      readonly isVertical?: boolean;
    };

/** A picture before it is SVG or pixels: one description, so that both show the same. */
export interface Drawing {
  readonly widthPt: number;
  readonly heightPt: number;
  readonly title: string;
  readonly marks: readonly Mark[];
}

export const MM_PER_POINT = 25.4 / 72;

/** Height of a capital in shares of the text size, as in common sans-serif fonts. */
export const CAP_SHARE = 0.72;

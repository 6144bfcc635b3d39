package picture

// The palette: a dark blue and a burnt orange that stay apart under the common
// kinds of colour blindness and differ in lightness on grey paper; violet and
// teal for what came and what went, told apart by the lean of their hatching.
const (
	inkColour     = "#22262b"
	quietColour   = "#5d646c"
	paperColour   = "#fcfbf7"
	floorColour   = "#ffffff"
	solidColour   = "#3b4148"
	rasterColour  = "#959ca4"
	unknownColour = "#c9cdd1"
	openColour    = "#12457f"
	tightColour   = "#e0782a"
	barColour     = "#4a1700"
	bandOpen      = "#dbe7f3"
	bandTight     = "#f9dcc2"
	addedColour   = "#86197f"
	removedColour = "#08706b"
	closedColour  = "#9a2a3a"
	speedColour   = "#8a7200"
	onewayColour  = "#3f6b3a"
)

const fontFamily = `"DejaVu Sans",Verdana,Arial,sans-serif`

// Font sizes, in user units.
const (
	titleSize  = 24.0
	figureSize = 15.0
	bodySize   = 14.0
	labelSize  = 13.0
	smallSize  = 12.0
)

const styleSheet = `text{font-family:` + fontFamily + `;fill:` + inkColour + `;font-size:14px}
.title{font-size:24px;font-weight:bold}
.caption{font-size:15px;fill:` + quietColour + `}
.head{font-size:14px;font-weight:bold}
.small{font-size:12px;fill:` + quietColour + `}
.label{font-size:13px;paint-order:stroke;stroke:#fff;stroke-width:3.5px;stroke-linejoin:round}
.zone-label{font-size:12px;font-style:italic;paint-order:stroke;stroke:#fff;stroke-width:3.5px;stroke-linejoin:round}
.on-solid{font-size:12px;font-style:italic;fill:#fff}
.figure{font-size:15px;font-weight:bold;paint-order:stroke;stroke:#fff;stroke-width:4.5px;stroke-linejoin:round}
.number{font-size:12px;font-weight:bold;text-anchor:middle}
.paper{fill:` + paperColour + `}
.floor{fill:` + floorColour + `}
.frame{fill:none;stroke:` + inkColour + `;stroke-width:1}
.solid{fill:` + solidColour + `;stroke:none;fill-rule:evenodd}
.solid-line{fill:none;stroke:` + solidColour + `;stroke-linecap:round;stroke-linejoin:round}
.tolerance{fill:none;stroke:#b9bec4;stroke-linejoin:round;stroke-linecap:round}
.raster{fill:` + rasterColour + `}
.unknown{fill:url(#unknown)}
.closed{fill:url(#closed);stroke:` + closedColour + `;stroke-width:1.6;fill-rule:evenodd}
.speed{fill:url(#speed);stroke:` + speedColour + `;stroke-width:1;stroke-dasharray:7 3;fill-rule:evenodd}
.oneway{stroke:` + onewayColour + `;stroke-width:1;stroke-dasharray:2 3;fill-rule:evenodd}
.band-open{fill:` + bandOpen + `}
.band-tight{fill:` + bandTight + `}
.casing{fill:none;stroke:#fff;stroke-linejoin:round;stroke-linecap:round}
.open{fill:none;stroke:` + openColour + `;stroke-linejoin:round;stroke-linecap:round}
.tight{fill:none;stroke:` + tightColour + `;stroke-linejoin:round;stroke-linecap:butt}
.bars{fill:none;stroke:` + barColour + `;stroke-linejoin:round;stroke-linecap:butt}
.arrow{fill:` + openColour + `;stroke:#fff;stroke-width:1}
.previous{fill:none;stroke:` + quietColour + `;stroke-width:2.2;stroke-dasharray:1.5 5;stroke-linecap:round;stroke-linejoin:round}
.body{fill:none;stroke:` + inkColour + `;stroke-width:1.6}
.needs{fill:none;stroke:` + inkColour + `;stroke-width:1.2;stroke-dasharray:5 4}
.smallest{fill:none;stroke:` + barColour + `;stroke-width:2.4}
.leader{stroke:` + inkColour + `;stroke-width:1;fill:none}
.end{fill:#fff;stroke:` + openColour + `;stroke-width:3}
.goal{fill:` + openColour + `;stroke:#fff;stroke-width:1.5}
.station{fill:#fff;stroke:` + inkColour + `;stroke-width:1.4}
.tick{stroke:` + inkColour + `;stroke-width:1.8}
.chip{fill:#fff;stroke:` + barColour + `;stroke-width:1.8}
.added{fill:url(#added);stroke:` + addedColour + `;stroke-width:1.6;fill-rule:evenodd}
.added-cells{fill:url(#added)}
.removed-cells{fill:url(#removed)}
.added-line{fill:none;stroke:` + addedColour + `;stroke-width:1.6}
.removed{fill:url(#removed);stroke:` + removedColour + `;stroke-width:1.6;stroke-dasharray:6 3;fill-rule:evenodd}
.roadmap-cell{fill:none;stroke:#7d8790;stroke-width:0.7;stroke-linejoin:round}
.roadmap-thin{fill:#e3e6e9;stroke:none}
.roadmap-node{fill:` + inkColour + `;stroke:none}
.step-0{fill:none;stroke:#b0400a;stroke-linejoin:round}
.step-1{fill:none;stroke:` + tightColour + `;stroke-linejoin:round}
.step-2{fill:none;stroke:#2a9db0;stroke-linejoin:round}
.step-3{fill:none;stroke:` + openColour + `;stroke-linejoin:round}
.step-0-area{fill:#e58a55}
.step-1-area{fill:#f6cfa6}
.step-2-area{fill:#cdebf0}
.step-3-area{fill:#8fb4da}
.blind{fill:none;stroke:#d79ad3;stroke-width:7;stroke-linejoin:round;stroke-linecap:butt;stroke-dasharray:5 4}
.grown{fill:` + bandTight + `;fill-rule:evenodd;stroke:none}
.grown-line{fill:none;stroke:` + barColour + `;stroke-width:1.2}
.plate{fill:` + paperColour + `;opacity:0.88}
.scale{fill:` + inkColour + `}
.rule{stroke:#c9c6bd;stroke-width:1}`

// patterns are the hatchings that tell areas apart without colour.
const patterns = `<pattern id="unknown" width="6" height="6" patternUnits="userSpaceOnUse"><rect width="6" height="6" fill="#eceef0"/><circle cx="1.5" cy="1.5" r="1.1" fill="#9aa1a8"/><circle cx="4.5" cy="4.5" r="1.1" fill="#9aa1a8"/></pattern>
<pattern id="closed" width="9" height="9" patternUnits="userSpaceOnUse"><path d="M0 0L9 9M9 0L0 9" stroke="` + closedColour + `" stroke-width="0.8" opacity="0.6"/></pattern>
<pattern id="speed" width="14" height="14" patternUnits="userSpaceOnUse"><path d="M0 3.5H7M7 10.5H14" stroke="` + speedColour + `" stroke-width="1.2" opacity="0.6"/></pattern>
<pattern id="added" width="7" height="7" patternUnits="userSpaceOnUse" patternTransform="rotate(45)"><rect width="7" height="7" fill="#f3e2f1"/><path d="M1.5 0V7" stroke="` + addedColour + `" stroke-width="2.4"/></pattern>
<pattern id="removed" width="7" height="7" patternUnits="userSpaceOnUse" patternTransform="rotate(-45)"><rect width="7" height="7" fill="#f1f8f7"/><path d="M1.5 0V7" stroke="` + removedColour + `" stroke-width="1.1"/></pattern>`

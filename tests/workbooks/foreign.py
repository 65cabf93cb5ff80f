"""A workbook as somebody else's program may have left it: all that a share copy must keep or take care of.

Written by hand from ECMA-376, part 1, with what openpyxl would lose: a text box, sparklines, a printer's
settings, rich text, readings of East Asian words, a custom part.
"""

from xml.sax.saxutils import escape, quoteattr

from steelyard.addin import call
from steelyard.workbooks.parts import write_parts

MAIN = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
OFFICE = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
PACKAGE = "http://schemas.openxmlformats.org/package/2006"
DRAWING = "http://schemas.openxmlformats.org/drawingml/2006"
X14 = "http://schemas.microsoft.com/office/spreadsheetml/2009/9/main"
XM = "http://schemas.microsoft.com/office/excel/2006/main"
SHEET_ML = "application/vnd.openxmlformats-officedocument.spreadsheetml"
HEAD = '<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\r\n'

PLANS = [
    "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4",
    "binomial | n 59 | claim p>=0.05 | alpha 0.05 | reject x<=0 | verdict pass",
    "poisson | units 120 | claim rate<=0.05 | alpha 0.05 | reject x>=11",
]
RATES = [0.05, 0.1, 0.2]
POWERS = [call("power", [plan, 0.1]) for plan in PLANS]
ROW = [call("power", [PLANS[0], rate]) for rate in RATES]
SIZES = [call("size", [plan]) for plan in PLANS[:2]]
NATIVE = "_xlfn.BINOM.DIST(46,50,1-B1,TRUE)"
STALE = 0.7  # stored beside it: a reader that recalculates shows the power of the first plan instead


def cell(ref, value=None, formula="", attributes="", formula_attributes=""):
    """Return a cell's XML; a number is written with all its digits."""
    kind, shown = "", ""
    if isinstance(value, bool):
        kind, shown = ' t="b"', f"<v>{value:d}</v>"
    elif isinstance(value, str):
        kind, shown = ' t="str"', f"<v>{escape(value)}</v>"
    elif value is not None:
        shown = f"<v>{value!r}</v>"
    written = f"<f{formula_attributes}>{escape(formula)}</f>" if formula or formula_attributes else ""
    return f'<c r="{ref}"{attributes}{kind}>{written}{shown}</c>'


def text(ref, number):
    return f'<c r="{ref}" s="1" t="s"><v>{number}</v></c>'


def plan_rows():
    shared = ' t="shared" ref="B2:B4" si="0"'
    array, dynamic = ' t="array" ref="F2:H2"', ' cm="1"'
    return [
        [
            text("A1", 3),
            cell("B1", 0.1, attributes=' s="1"'),
            *(cell(f"{letter}1", rate) for letter, rate in zip("FGH", RATES, strict=True)),
            '<c r="J1" t="inlineStr"><is><t>Plan</t></is></c>',
            '<c r="K1" t="inlineStr"><is><t>Size</t></is></c>',
        ],
        [
            text("A2", 0),
            cell("B2", POWERS[0], "[1]!SY_POWER(A2,$B$1)", formula_attributes=shared),
            cell("C2", "ok", 'IF([1]!SY_POWER(A2,B$1)>0.5,"ok","no")', attributes=' s="1"'),
            cell("E2", STALE, NATIVE),
            cell("F2", ROW[0], "[1]!SY_POWER(A2,F1:H1)", dynamic, array),
            cell("G2", ROW[1]),
            cell("H2", ROW[2]),
            text("J2", 0),
            cell("K2", SIZES[0], "[1]!SY_SIZE(J2)"),
        ],
        [
            text("A3", 1),
            cell("B3", POWERS[1], formula_attributes=' t="shared" si="0"'),
            cell("C3", "", 'IF(SY.POWER(A3,B$1)>0.999,"ok","")'),
            cell("E3", True, "ISTEXT(C3)"),
            text("J3", 1),
            cell("K3", SIZES[1], "[1]!SY_SIZE(J3)"),
        ],
        [
            text("A4", 2),
            cell("B4", POWERS[2], formula_attributes=' t="shared" si="0"'),
            cell("C4", True, "sy_power(A4,B1)>0.5", attributes=' s="1"'),
            cell("E4", POWERS[0] * 2, "B2*2"),
        ],
    ]


def plan_sheet(tail=""):
    rows = "".join(
        f'<row r="{number}" spans="1:11">{"".join(cells)}</row>'
        for number, cells in enumerate(plan_rows(), 1)
    )
    return (
        f'{HEAD}<worksheet xmlns="{MAIN}" xmlns:r="{OFFICE}" xmlns:mc="other">\n<dimension ref="A1:K4"/>'
        f"<sheetData>{rows}</sheetData><!-- kept as it is -->"
        '<conditionalFormatting sqref="B2:B4"><cfRule type="expression" dxfId="0" priority="1">'
        "<formula>B2&gt;0.5</formula></cfRule></conditionalFormatting>"
        '<dataValidations count="1"><dataValidation type="decimal" operator="between" sqref="B1">'
        f"<formula1>0</formula1><formula2>1</formula2></dataValidation></dataValidations>{tail}"
        '<pageSetup orientation="landscape" r:id="rId3"/><drawing r:id="rId1"/><legacyDrawing r:id="rId2"/>'
        '<tableParts count="1"><tablePart r:id="rId4"/></tableParts>'
        f'<extLst><ext xmlns:x14="{X14}" uri="{{05C60535-1F16-4fd2-B633-F4F36F0B64E0}}">'
        f'<x14:sparklineGroups xmlns:xm="{XM}"><x14:sparklineGroup><x14:sparklines><x14:sparkline>'
        "<xm:f>Plan!F2:H2</xm:f><xm:sqref>I2</xm:sqref></x14:sparkline></x14:sparklines>"
        "</x14:sparklineGroup></x14:sparklineGroups></ext></extLst></worksheet>"
    )


DATA_SHEET = (
    f'{HEAD}<x:worksheet xmlns:x="{MAIN}"><x:sheetData><x:row r="1">'
    '<x:c r="A1" t="inlineStr"><x:is><x:r><x:t xml:space="preserve">Leak </x:t></x:r>'
    "<x:r><x:t>at 1 bar</x:t></x:r></x:is></x:c>"
    '<x:c r="B1"><x:v>1.0000000000000001E-5</x:v></x:c><x:c r="C1"><x:f>B1+1</x:f><x:v>1.00001</x:v></x:c>'
    '<x:c r="D1" t="str"><x:f>sy.region(Plan!A2)</x:f><x:v>x ≥ 4</x:v></x:c></x:row>'
    "</x:sheetData></x:worksheet>"
)
STRINGS = (
    f'{HEAD}<sst xmlns="{MAIN}" count="6" uniqueCount="4">'
    + "".join(f"<si><t>{escape(plan)}</t></si>" for plan in PLANS)
    + '<si><r><rPr><b/></rPr><t>Ra</t></r><r><t xml:space="preserve">te </t></r>'
    '<rPh sb="0" eb="1"><t>reading</t></rPh></si></sst>'
)
STYLES = (
    f'{HEAD}<styleSheet xmlns="{MAIN}"><fonts count="1"><font><sz val="10"/><name val="Arial"/></font>'
    '</fonts><fills count="2"><fill><patternFill patternType="none"/></fill><fill>'
    '<patternFill patternType="gray125"/>'
    '</fill></fills><borders count="1"><border/></borders><cellStyleXfs count="1"><xf/></cellStyleXfs>'
    '<cellXfs count="2"><xf xfId="0"/><xf xfId="0" numFmtId="10" applyNumberFormat="1"/></cellXfs>'
    '<cellStyles count="1"><cellStyle name="Normal" xfId="0" builtinId="0"/></cellStyles>'
    '<dxfs count="1"><dxf><font><b/></font></dxf></dxfs></styleSheet>'
)
TABLE = (
    f'{HEAD}<table xmlns="{MAIN}" id="1" name="Plans" displayName="Plans" ref="J1:K3" totalsRowShown="0">'
    '<autoFilter ref="J1:K3"/><tableColumns count="2"><tableColumn id="1" name="Plan"/>'
    '<tableColumn id="2" name="Size"><calculatedColumnFormula>[1]!SY_SIZE(Plans[[#This Row],[Plan]])'
    "</calculatedColumnFormula></tableColumn></tableColumns></table>"
)
LINK = (
    f'{HEAD}<externalLink xmlns="{MAIN}" xmlns:r="{OFFICE}"><externalBook r:id="rId1"><definedNames>'
    '<definedName name="SY_POWER"/><definedName name="SY_SIZE"/></definedNames></externalBook></externalLink>'
)
SPREADSHEET_DRAWING = f"{DRAWING}/spreadsheetDrawing"
BOX = (
    f'{HEAD}<xdr:wsDr xmlns:xdr="{SPREADSHEET_DRAWING}" xmlns:a="{DRAWING}/main"><xdr:twoCellAnchor>'
    "<xdr:from><xdr:col>1</xdr:col><xdr:colOff>0</xdr:colOff><xdr:row>8</xdr:row><xdr:rowOff>0</xdr:rowOff>"
    "</xdr:from><xdr:to><xdr:col>4</xdr:col><xdr:colOff>0</xdr:colOff><xdr:row>12</xdr:row>"
    '<xdr:rowOff>0</xdr:rowOff></xdr:to><xdr:sp><xdr:nvSpPr><xdr:cNvPr id="2" name="Box"/>'
    '<xdr:cNvSpPr txBox="1"/></xdr:nvSpPr><xdr:spPr><a:prstGeom prst="rect"/></xdr:spPr><xdr:txBody>'
    "<a:bodyPr/>"
    "<a:p><a:r><a:t>See SY_POWER(A2) for the emitters</a:t></a:r></a:p></xdr:txBody></xdr:sp>"
    "<xdr:clientData/></xdr:twoCellAnchor><xdr:twoCellAnchor><xdr:from><xdr:col>1</xdr:col><xdr:colOff>0"
    "</xdr:colOff><xdr:row>14</xdr:row><xdr:rowOff>0</xdr:rowOff></xdr:from><xdr:to><xdr:col>6</xdr:col>"
    "<xdr:colOff>0</xdr:colOff><xdr:row>30</xdr:row><xdr:rowOff>0</xdr:rowOff></xdr:to>"
    '<xdr:graphicFrame><xdr:nvGraphicFramePr><xdr:cNvPr id="3" name="Chart"/><xdr:cNvGraphicFramePr/>'
    '</xdr:nvGraphicFramePr><xdr:xfrm><a:off x="0" y="0"/><a:ext cx="0" cy="0"/></xdr:xfrm><a:graphic>'
    f'<a:graphicData uri="{DRAWING}/chart"><c:chart xmlns:c="{DRAWING}/chart" xmlns:r="{OFFICE}"'
    ' r:id="rId1"/>'
    "</a:graphicData></a:graphic></xdr:graphicFrame><xdr:clientData/></xdr:twoCellAnchor></xdr:wsDr>"
)
CHART = (
    f'{HEAD}<c:chartSpace xmlns:c="{DRAWING}/chart"><c:chart><c:plotArea><c:barChart><c:barDir val="col"/>'
    '<c:ser><c:idx val="0"/><c:order val="0"/><c:val><c:numRef><c:f>Plan!$F$2:$H$2</c:f></c:numRef></c:val>'
    '</c:ser><c:axId val="1"/><c:axId val="2"/></c:barChart><c:catAx><c:axId val="1"/><c:crossAx val="2"/>'
    '</c:catAx><c:valAx><c:axId val="2"/><c:crossAx val="1"/></c:valAx></c:plotArea></c:chart></c:chartSpace>'
)
COMMENTS = (
    f'{HEAD}<comments xmlns="{MAIN}"><authors><author>QA</author></authors><commentList><comment ref="B2" '
    'authorId="0"><text><r><t>from SY_POWER(A2)</t></r></text></comment></commentList></comments>'
)
NOTE = (
    '<xml xmlns:v="urn:schemas-microsoft-com:vml" xmlns:x="urn:schemas-microsoft-com:office:excel"><v:shape>'
    '<x:ClientData ObjectType="Note"><x:Row>1</x:Row><x:Column>1</x:Column></x:ClientData></v:shape></xml>'
)
METADATA = (
    f'{HEAD}<metadata xmlns="{MAIN}"><metadataTypes count="1"><metadataType name="XLDAPR"/></metadataTypes>'
    '<cellMetadata count="1"><bk><rc t="1" v="0"/></bk></cellMetadata></metadata>'
)
CHAIN = f'{HEAD}<calcChain xmlns="{MAIN}"><c r="B2" i="1"/><c r="C2"/><c r="E2"/></calcChain>'
NAMES = (
    '<definedName name="Rate">Plan!$B$1</definedName>'
    '<definedName name="_xlnm.Print_Area" localSheetId="0">Plan!$A$1:$H$4</definedName>'
)


def workbook(names=NAMES, calculation='<calcPr calcId="191029" iterate="1"/>'):
    return (
        f'{HEAD}<workbook xmlns="{MAIN}" xmlns:r="{OFFICE}"><workbookPr date1904="0"/><bookViews>'
        '<workbookView xWindow="0"/></bookViews><sheets><sheet name="Plan" sheetId="4" r:id="rId7"/>'
        '<sheet name="Data\'s" sheetId="9" state="hidden" r:id="rId1"/></sheets><externalReferences>'
        f'<externalReference r:id="rId3"/></externalReferences><definedNames>{names}</definedNames>'
        f"{calculation}</workbook>"
    )


def relations(*targets):
    """Return the XML of relations, each given as id, kind and target."""
    entries = "".join(
        f'<Relationship Id="{key}" Type="{OFFICE}/{kind}" Target={quoteattr(target)}{mode}/>'
        for key, kind, target, *mode_given in targets
        for mode in [' TargetMode="External"' if mode_given else ""]
    )
    return f'{HEAD}<Relationships xmlns="{PACKAGE}/relationships">{entries}</Relationships>'


def content_types(parts):
    kinds = {
        "xl/workbook.xml": f"{SHEET_ML}.sheet.main+xml",
        "xl/worksheets/first.xml": f"{SHEET_ML}.worksheet+xml",
        "xl/worksheets/sheet3.xml": f"{SHEET_ML}.worksheet+xml",
        "xl/sharedStrings.xml": f"{SHEET_ML}.sharedStrings+xml",
        "xl/styles.xml": f"{SHEET_ML}.styles+xml",
        "xl/calcChain.xml": f"{SHEET_ML}.calcChain+xml",
        "xl/metadata.xml": f"{SHEET_ML}.sheetMetadata+xml",
        "xl/externalLinks/externalLink1.xml": f"{SHEET_ML}.externalLink+xml",
        "xl/tables/table1.xml": f"{SHEET_ML}.table+xml",
        "xl/comments1.xml": f"{SHEET_ML}.comments+xml",
        "xl/drawings/drawing1.xml": "application/vnd.openxmlformats-officedocument.drawing+xml",
        "xl/charts/chart1.xml": "application/vnd.openxmlformats-officedocument.drawingml.chart+xml",
    }
    defaults = {
        "rels": "application/vnd.openxmlformats-package.relationships+xml",
        "xml": "application/xml",
        "vml": "application/vnd.openxmlformats-officedocument.vmlDrawing",
        "bin": f"{SHEET_ML}.printerSettings",
    }
    written = [f'<Default Extension="{end}" ContentType="{kind}"/>' for end, kind in defaults.items()]
    written += [
        f'<Override PartName="/{name}" ContentType="{kind}"/>'
        for name, kind in kinds.items()
        if name in parts
    ]
    return f'{HEAD}<Types xmlns="{PACKAGE}/content-types">{"".join(written)}</Types>'


def foreign_parts(**replaced):
    """Return the parts; ``names``, ``tail``, ``calculation`` and ``table`` may be given other texts."""
    parts = {
        "_rels/.rels": relations(
            ("rId1", "officeDocument", "xl/workbook.xml"), ("rId2", "customXml", "customXml/item1.xml")
        ),
        "xl/workbook.xml": workbook(
            replaced.get("names", NAMES), replaced.get("calculation", '<calcPr calcId="191029" iterate="1"/>')
        ),
        "xl/_rels/workbook.xml.rels": relations(
            ("rId1", "worksheet", "/xl/worksheets/sheet3.xml"),
            ("rId7", "worksheet", "worksheets/first.xml"),
            ("rId3", "externalLink", "externalLinks/externalLink1.xml"),
            ("rId4", "styles", "styles.xml"),
            ("rId5", "sharedStrings", "sharedStrings.xml"),
            ("rId6", "calcChain", "calcChain.xml"),
            ("rId8", "sheetMetadata", "metadata.xml"),
        ),
        "xl/worksheets/first.xml": plan_sheet(replaced.get("tail", "")),
        "xl/worksheets/_rels/first.xml.rels": relations(
            ("rId1", "drawing", "../drawings/drawing1.xml"),
            ("rId2", "vmlDrawing", "../drawings/vmlDrawing1.vml"),
            ("rId3", "printerSettings", "../printerSettings/printerSettings1.bin"),
            ("rId4", "table", "../tables/table1.xml"),
            ("rId5", "comments", "../comments1.xml"),
        ),
        "xl/worksheets/sheet3.xml": DATA_SHEET,
        "xl/sharedStrings.xml": STRINGS,
        "xl/styles.xml": STYLES,
        "xl/calcChain.xml": CHAIN,
        "xl/metadata.xml": METADATA,
        "xl/externalLinks/externalLink1.xml": LINK,
        "xl/externalLinks/_rels/externalLink1.xml.rels": relations(
            ("rId1", "externalLinkPath", "steelyard.xlam", "External")
        ),
        "xl/tables/table1.xml": replaced.get("table", TABLE),
        "xl/comments1.xml": COMMENTS,
        "xl/drawings/vmlDrawing1.vml": NOTE,
        "xl/drawings/drawing1.xml": BOX,
        "xl/drawings/_rels/drawing1.xml.rels": relations(("rId1", "chart", "../charts/chart1.xml")),
        "xl/charts/chart1.xml": CHART,
        "xl/printerSettings/printerSettings1.bin": "\x01\x02[1]",
        "customXml/item1.xml": "<lot><number>17</number></lot>",
    }
    parts = {"[Content_Types].xml": content_types(parts)} | parts
    return {name: content.encode() for name, content in parts.items()}


def foreign_book(path, **replaced):
    """Write the workbook and return its path."""
    write_parts(path, foreign_parts(**replaced))
    return path

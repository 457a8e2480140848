"""The language server against the client of an independent library, pygls (its types come from the official metamodel of
the protocol and refuse what does not fit it). Run by tests/outside/run with the program as the argument; prints what
was checked and ends with an error when something does not hold."""

import asyncio
import pathlib
import sys
import tempfile

from lsprotocol import types
from pygls.lsp.client import LanguageClient

LANE = """module lane(input clk, sel, a, b, d, output reg q);
    wire clear_n = sel ? a : b;
    always @(posedge clk or negedge clear_n) if (!clear_n) q <= 1'b0; else q <= d;
endmodule
"""


class Client(LanguageClient):
    """Keeps the diagnostics of each file."""

    def __init__(self):
        super().__init__("checker", "1")
        self.news = asyncio.Queue()

        @self.feature(types.TEXT_DOCUMENT_PUBLISH_DIAGNOSTICS)
        def _(params: types.PublishDiagnosticsParams):
            self.news.put_nowait(params)

        @self.feature(types.WINDOW_LOG_MESSAGE)
        def _(params: types.LogMessageParams):
            print("server:", params.message)

    async def diagnostics(self, uri, wanted):
        """Waits until the diagnostics of the file are as wanted."""
        while True:
            params = await asyncio.wait_for(self.news.get(), 60)
            if params.uri == uri and wanted(params.diagnostics):
                return params.diagnostics


def applied(text, edit):
    """The text with one edit of whole lines."""
    lines = text.splitlines(keepends=True)
    assert edit.range.start.character == 0 and edit.range.end.character == 0
    return "".join(lines[: edit.range.start.line]) + edit.new_text + "".join(lines[edit.range.end.line :])


async def check(program, folder):
    file = folder / "rtl" / "lane.v"
    file.parent.mkdir()
    file.write_text(LANE)
    uri = file.as_uri()
    client = Client()
    await client.start_io(program, "serve", "--cache", str(folder / ".cache"))
    edits = types.ClientCodeActionResolveOptions(properties=["edit"])
    capabilities = types.ClientCapabilities(
        text_document=types.TextDocumentClientCapabilities(
            code_action=types.CodeActionClientCapabilities(resolve_support=edits)
        )
    )
    result = await client.initialize_async(
        types.InitializeParams(capabilities=capabilities, root_uri=folder.as_uri(), process_id=None)
    )
    assert result.server_info.name == "stillwire"
    client.initialized(types.InitializedParams())

    document = types.TextDocumentItem(uri=uri, language_id="systemverilog", version=1, text=LANE)
    client.text_document_did_open(types.DidOpenTextDocumentParams(text_document=document))
    [finding] = [one for one in await client.diagnostics(uri, len) if one.code == "set-reset-hazard"]
    assert finding.severity == types.DiagnosticSeverity.Error
    assert finding.range.start.line == 1
    assert len(finding.related_information) >= 2, finding.related_information
    print("diagnostics on open:", finding.message.splitlines()[0])

    identifier = types.TextDocumentIdentifier(uri=uri)
    place = types.Position(line=1, character=finding.range.start.character)
    hover = await client.text_document_hover_async(types.HoverParams(text_document=identifier, position=place))
    assert "`lane.sel` changes from" in hover.contents.value, hover.contents.value
    print("hover with the witness")

    async def actions():
        return await client.text_document_code_action_async(
            types.CodeActionParams(
                text_document=identifier, range=finding.range, context=types.CodeActionContext(diagnostics=[finding])
            )
        )

    found = await actions()
    [signoff] = [one for one in found if one.title.startswith("Sign off set-reset-hazard")]
    [cure] = [one for one in found if one.title.startswith("Cure set-reset-hazard")]
    [edit] = signoff.edit.changes[uri]

    def saved(text):
        file.write_text(text)
        client.text_document_did_change(
            types.DidChangeTextDocumentParams(
                text_document=types.VersionedTextDocumentIdentifier(uri=uri, version=2),
                content_changes=[types.TextDocumentContentChangeWholeDocument(text=text)],
            )
        )
        client.text_document_did_save(types.DidSaveTextDocumentParams(text_document=identifier))

    def codes(diagnostics):
        return {one.code for one in diagnostics}

    signed = applied(LANE, edit)
    saved(signed)
    await client.diagnostics(uri, lambda all: {"signoff-invalid", "set-reset-hazard"} <= codes(all))
    print("a sign-off without a reason accepts nothing")
    saved(signed.replace('""', '"the relay is slow"'))
    await client.diagnostics(uri, lambda all: "set-reset-hazard" not in codes(all))
    print("a sign-off with its reason accepts the finding")

    saved(LANE)
    await client.diagnostics(uri, lambda all: "set-reset-hazard" in codes(all))
    resolved = await client.code_action_resolve_async(cure)
    [edit] = resolved.edit.changes[uri]
    saved(applied(LANE, edit))
    await client.diagnostics(uri, lambda all: "set-reset-hazard" not in codes(all))
    print("the cure removes the finding")

    await asyncio.wait_for(client.shutdown_async(None), 10)
    client.exit(None)
    await asyncio.wait_for(client._server.wait(), 10)
    assert client._server.returncode == 0, client._server.returncode
    print("shutdown and exit")


with tempfile.TemporaryDirectory() as temporary:
    asyncio.run(asyncio.wait_for(check(sys.argv[1], pathlib.Path(temporary).resolve()), 300))

' Title: Basic macros for LibreOffice Calc: judge the selected cells, post them, fetch the limits
' Install: Tools, Macros, Edit Macros; under My Macros choose the library Standard and paste this text into a new module
'   named Limitary. Run LimitaryJudge, LimitaryPost or LimitaryFetchLimits with Tools, Macros, Run Macro, or put them on
'   a toolbar with Tools, Customize. Cells named limitary_base (address of the service), limitary_chart, limitary_source,
'   limitary_lot and limitary_zone (Sheet, Named Ranges) say what would otherwise be asked for.
' Limits: 10,000 rows at once, which take about 15 seconds. A post is all or nothing, and safe to repeat. Dates in cells need a zone. The key is kept,
'   readable for whoever can read the files of this account, in limitary.keys of the user profile, never in a document;
'   LimitaryForgetKey removes it. It is sent to the address it was given for and to no other. A post is
'   previewed first, and what is wrong is written beside the rows.
' Run here: yes, with LibreOffice 7.4.7 of Debian 12, in an en-US and a de-DE profile, by the test of this kit
Option Explicit

' The service, where no cell named limitary_base gives another address.
Const SERVICE = "http://127.0.0.1:7410"
Const ROWS_MAX = 10000
Const LIMITS_SHEET = "limitary_limits"
Const ADDED = "limitary_"

' The key of the request in work; LimitaryEnv_getUserRequestHeaders hands it to the network.
Private keyInUse As String

' --- What a user runs ------------------------------------------------------------------------------------------------

' Judges the selected column, or the selected columns value, value 2, ..., and stores nothing.
Sub LimitaryJudge
  LimitaryTell(LimitaryJudgeSelection())
End Sub

' Posts the selected block. Its first row names the columns: id, time, value and whatever else there is.
Sub LimitaryPost
  LimitaryTell(LimitaryPostSelection())
End Sub

' Fetches the limits in force into the sheet limitary_limits.
Sub LimitaryFetchLimits
  LimitaryTell(LimitaryFetch())
End Sub

' Forgets the key of the service that this document names.
Sub LimitaryForgetKey
  LimitaryKeepKey(LimitaryBase(ThisComponent), "")
End Sub

Sub LimitaryTell(trouble As String)
  If trouble <> "" Then MsgBox trouble, 48, "Limitary"
End Sub

' --- The three jobs; each gives what went wrong, or nothing ----------------------------------------------------------

Function LimitaryJudgeSelection() As String
  Dim doc, block, url As String, lot As String, trouble As String
  doc = ThisComponent
  trouble = LimitarySelected(doc, block)
  If trouble = "" Then trouble = LimitaryClearAdded(block)
  If trouble = "" Then
    url = LimitaryBase(doc) & "/sheet/judge/" & LimitaryEncode(LimitarySetting(doc, "chart", "Judge against which chart?")) & "?delimiter=tab&decimal=point"
    If Not LimitaryHasHeader(block) Then url = url & "&header=no"
    lot = LimitarySetting(doc, "lot", "")
    If lot <> "" Then url = url & "&lot=" & LimitaryEncode(lot)
    trouble = LimitarySend(doc, block, url, LimitaryHasHeader(block))
  End If
  LimitaryJudgeSelection = trouble
End Function

Function LimitaryPostSelection() As String
  Dim doc, block, url As String, lot As String, trouble As String
  doc = ThisComponent
  trouble = LimitarySelected(doc, block)
  If trouble = "" And Not LimitaryHasHeader(block) Then trouble = "The first row of what is posted must name the columns: id, time, value."
  If trouble = "" Then trouble = LimitaryClearAdded(block)
  If trouble = "" Then
    url = LimitaryBase(doc) & "/sheet/results/" & LimitaryEncode(LimitarySetting(doc, "chart", "Post to which chart?")) & "?delimiter=tab&decimal=point"
    If Not LimitaryNames(block, "source") Then url = url & "&source=" & LimitaryEncode(LimitarySetting(doc, "source", "Where do the results come from? Always give the same for the same sheet."))
    lot = LimitarySetting(doc, "lot", "")
    If lot <> "" And Not LimitaryNames(block, "lot") Then url = url & "&lot=" & LimitaryEncode(lot)
    If LimitaryHasDates(doc, block) Then url = url & "&zone=" & LimitaryEncode(LimitarySetting(doc, "zone", "Which zone are the times of? Such as Europe/London or +01:00"))
    trouble = LimitarySend(doc, block, url & "&preview=1", True)
    If trouble = "" Then
      If LimitaryRefusedRows(block) > 0 Then
        trouble = "Nothing was stored. What is wrong stands beside the rows."
      Else
        trouble = LimitaryClearAdded(block)
        If trouble = "" Then trouble = LimitarySend(doc, block, url, True)
      End If
    End If
  End If
  LimitaryPostSelection = trouble
End Function

Function LimitaryFetch() As String
  Dim doc, sheet, rows, names, at As String, text As String, trouble As String, i As Long, k As Long
  doc = ThisComponent
  at = LimitaryBase(doc)
  trouble = LimitaryCall("GET", at, at & "/sheet/limits.tsv?decimal=point", "", text)
  If trouble <> "" Then
    LimitaryFetch = trouble
    Exit Function
  End If
  rows = LimitaryParse(text)
  names = rows(0)
  If doc.Sheets.hasByName(LIMITS_SHEET) Then
    sheet = doc.Sheets.getByName(LIMITS_SHEET)
    sheet.clearContents(1 + 2 + 4 + 16)
  Else
    doc.Sheets.insertNewByName(LIMITS_SHEET, doc.Sheets.Count)
    sheet = doc.Sheets.getByName(LIMITS_SHEET)
  End If
  For i = 0 To UBound(rows)
    For k = 0 To UBound(rows(i))
      LimitaryPut(sheet.getCellByPosition(k, i), rows(i)(k), i > 0 And LimitaryIsNumberColumn(names(k)))
    Next k
    sheet.getCellByPosition(UBound(names) + 1, i).String = IIf(i = 0, "limitary_fetched_at", LimitaryIso(CDbl(Now), 0))
  Next i
End Function

' The columns of the table of limits that hold text; all others hold numbers.
Function LimitaryIsNumberColumn(name As String) As Boolean
  LimitaryIsNumberColumn = InStr(" chart title lot unit kind track_state effective_from provisional rules dispersion_rules ", " " & name & " ") = 0
End Function

' --- Settings and the key --------------------------------------------------------------------------------------------

' What the cell named limitary_NAME says; else the answer to the question, if there is one.
Function LimitarySetting(doc, name As String, question As String) As String
  Dim cells
  If doc.NamedRanges.hasByName(ADDED & name) Then
    cells = doc.NamedRanges.getByName(ADDED & name).getReferredCells()
    If Not IsNull(cells) Then LimitarySetting = Trim(cells.getCellByPosition(0, 0).String)
  ElseIf question <> "" Then
    LimitarySetting = Trim(InputBox(question, "Limitary"))
  End If
End Function

Function LimitaryBase(doc) As String
  Dim at As String
  at = LimitarySetting(doc, "base", "")
  If at = "" Then at = SERVICE
  Do While Right(at, 1) = "/"
    at = Left(at, Len(at) - 1)
  Loop
  LimitaryBase = at
End Function

Function LimitaryKeyFile() As String
  LimitaryKeyFile = createUnoService("com.sun.star.util.PathSubstitution").substituteVariables("$(user)", True) & "/limitary.keys"
End Function

' The lines of the file of keys: an address, a tab, a key.
Function LimitaryKeyLines() As String
  Dim files, stream
  files = createUnoService("com.sun.star.ucb.SimpleFileAccess")
  If Not files.exists(LimitaryKeyFile()) Then Exit Function
  stream = createUnoService("com.sun.star.io.TextInputStream")
  stream.setInputStream(files.openFileRead(LimitaryKeyFile()))
  LimitaryKeyLines = stream.readString(Array(), False)
  stream.closeInput()
End Function

Function LimitaryKey(at As String) As String
  Dim row, given As String
  For Each row In Split(LimitaryKeyLines(), Chr(10))
    If Left(row, Len(at) + 1) = at & Chr(9) Then LimitaryKey = Mid(row, Len(at) + 2)
  Next row
  If LimitaryKey <> "" Then Exit Function
  given = Trim(InputBox("The key for " & at & ". It is kept in your profile and sent nowhere else.", "Limitary"))
  If given <> "" Then LimitaryKeepKey(at, given)
  LimitaryKey = given
End Function

' Keeps the key of an address; an empty one is forgotten.
Sub LimitaryKeepKey(at As String, given As String)
  Dim row, kept As String, files, stream
  For Each row In Split(LimitaryKeyLines(), Chr(10))
    If row <> "" And Left(row, Len(at) + 1) <> at & Chr(9) Then kept = kept & row & Chr(10)
  Next row
  If given <> "" Then kept = kept & at & Chr(9) & given & Chr(10)
  files = createUnoService("com.sun.star.ucb.SimpleFileAccess")
  If files.exists(LimitaryKeyFile()) Then files.kill(LimitaryKeyFile())
  stream = createUnoService("com.sun.star.io.TextOutputStream")
  stream.setOutputStream(files.openFileWrite(LimitaryKeyFile()))
  stream.writeString(kept)
  stream.closeOutput()
End Sub

' --- The network -----------------------------------------------------------------------------------------------------

' The content broker asks these three of the environment of a request.
Function LimitaryEnv_getUserRequestHeaders(uri, method)
  Dim headers(0) As New com.sun.star.beans.StringPair
  headers(0).First = "Authorization"
  headers(0).Second = "Bearer " & keyInUse
  LimitaryEnv_getUserRequestHeaders = headers()
End Function

Function LimitaryEnv_getInteractionHandler()
  LimitaryEnv_getInteractionHandler = Nothing
End Function

Function LimitaryEnv_getProgressHandler()
  LimitaryEnv_getProgressHandler = Nothing
End Function

' Asks the service; text is its answer. The key is that of the address at.
Function LimitaryCall(method As String, at As String, url As String, body As String, text As String) As String
  Dim broker, content, sink, stream
  Dim command As New com.sun.star.ucb.Command
  Dim opened As New com.sun.star.ucb.OpenCommandArgument2
  Dim posted As New com.sun.star.ucb.PostCommandArgument2
  keyInUse = LimitaryKey(at)
  If keyInUse = "" Then
    LimitaryCall = "Nothing was sent: there is no key for " & at & "."
    Exit Function
  End If
  On Error Goto Failed
  sink = createUnoService("com.sun.star.io.Pipe")
  command.Handle = -1
  If method = "POST" Then
    command.Name = "post"
    posted.Source = LimitaryPipe(body)
    posted.Sink = sink
    posted.MediaType = "text/tab-separated-values; charset=utf-8"
    command.Argument = posted
  Else
    command.Name = "open"
    opened.Mode = com.sun.star.ucb.OpenMode.DOCUMENT
    opened.Sink = sink
    command.Argument = opened
  End If
  broker = createUnoService("com.sun.star.ucb.UniversalContentBroker")
  content = broker.queryContent(broker.createContentIdentifier(url))
  content.execute(command, 0, CreateUnoListener("LimitaryEnv_", "com.sun.star.ucb.XWebDAVCommandEnvironment"))
  keyInUse = ""
  sink.closeOutput()
  stream = createUnoService("com.sun.star.io.TextInputStream")
  stream.setInputStream(sink)
  stream.setEncoding("UTF-8")
  text = stream.readString(Array(), False)
  Exit Function
Failed:
  keyInUse = ""
  LimitaryCall = LimitaryWhy(at, Error$)
End Function

Function LimitaryPipe(body As String)
  Dim pipe, stream
  pipe = createUnoService("com.sun.star.io.Pipe")
  stream = createUnoService("com.sun.star.io.TextOutputStream")
  stream.setOutputStream(pipe)
  stream.setEncoding("UTF-8")
  stream.writeString(body)
  stream.closeOutput()
  LimitaryPipe = pipe
End Function

' Makes a sentence of what the network reports: the status line and not the text of a refusal, and for two of them not even
' that: 401 is a general fault there, and 404 a file that is not found.
Function LimitaryWhy(at As String, report As String) As String
  Dim found As Long, status As String
  found = InStr(report, "HTTP/")
  If found > 0 Then
    status = Split(Split(Mid(report, found), Chr(10))(0), " at .")(0)
    LimitaryWhy = "The service refused: " & status & "."
    If InStr(status, " 403") > 0 Then LimitaryWhy = LimitaryWhy & " The key may not do this."
    If InStr(status, " 400") > 0 Then LimitaryWhy = LimitaryWhy & " The selected cells, or a setting, are not what it takes."
  ElseIf InStr(report, "InteractiveAugmentedIOException") > 0 Then
    LimitaryWhy = "There is no such chart at " & at & ", or the key does not see it."
  ElseIf InStr(report, "InteractiveNetworkGeneralException") > 0 Then
    LimitaryWhy = "The service at " & at & " does not know the key; run LimitaryForgetKey and give another."
  Else
    LimitaryWhy = "No answer from " & at & "; nothing is judged."
  End If
End Function

Function LimitaryEncode(text As String) As String
  Dim i As Long, k As Long, c As String, code As Long, bytes As String
  For i = 1 To Len(text)
    c = Mid(text, i, 1)
    If InStr("ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789-._~", c) > 0 Then
      bytes = c
    Else
      code = Asc(c)
      If code < 0 Then code = code + 65536
      If code < 128 Then
        bytes = LimitaryByte(code)
      ElseIf code < 2048 Then
        bytes = LimitaryByte(192 + code \ 64) & LimitaryByte(128 + code Mod 64)
      Else
        bytes = LimitaryByte(224 + code \ 4096) & LimitaryByte(128 + (code \ 64) Mod 64) & LimitaryByte(128 + code Mod 64)
      End If
    End If
    LimitaryEncode = LimitaryEncode & bytes
  Next i
End Function

Function LimitaryByte(code As Long) As String
  LimitaryByte = "%" & Right("0" & Hex(code), 2)
End Function

' --- The block: out of the sheet, and the answer beside it -----------------------------------------------------------

' Finds the selected block: one rectangle, without the empty rows below and without columns that an earlier answer added.
Function LimitarySelected(doc, block) As String
  Dim chosen, address, cursor, sheet, lastRow As Long, lastColumn As Long
  chosen = doc.CurrentSelection
  If IsNull(chosen) Then
    LimitarySelected = "Select the cells first."
    Exit Function
  ElseIf Not HasUnoInterfaces(chosen, "com.sun.star.sheet.XCellRangeAddressable") Then
    LimitarySelected = "Select one rectangle of cells."
    Exit Function
  End If
  address = chosen.RangeAddress
  sheet = doc.Sheets.getByIndex(address.Sheet)
  cursor = sheet.createCursor()
  cursor.gotoEndOfUsedArea(False)
  lastRow = IIf(address.EndRow < cursor.RangeAddress.EndRow, address.EndRow, cursor.RangeAddress.EndRow)
  lastColumn = IIf(address.EndColumn < cursor.RangeAddress.EndColumn, address.EndColumn, cursor.RangeAddress.EndColumn)
  Do While lastColumn > address.StartColumn And Left(sheet.getCellByPosition(lastColumn, address.StartRow).String, Len(ADDED)) = ADDED
    lastColumn = lastColumn - 1
  Loop
  Do While lastRow > address.StartRow And Not LimitaryFilled(sheet.getCellRangeByPosition(address.StartColumn, lastRow, lastColumn, lastRow))
    lastRow = lastRow - 1
  Loop
  If lastRow < address.StartRow Or lastColumn < address.StartColumn Then
    LimitarySelected = "The selected cells are empty."
  ElseIf lastRow - address.StartRow > ROWS_MAX Then
    LimitarySelected = "More than " & ROWS_MAX & " rows are selected, which is the limit; send them in parts."
  Else
    block = sheet.getCellRangeByPosition(address.StartColumn, address.StartRow, lastColumn, lastRow)
    If Not LimitaryFilled(block) Then LimitarySelected = "The selected cells are empty."
  End If
End Function

' Whether a cell of a range holds something. Asking for cells by their content gives others, where the range lies beyond all
' that is used.
Function LimitaryFilled(cells) As Boolean
  Dim row, content
  For Each row In cells.getFormulaArray()
    For Each content In row
      If content <> "" Then
        LimitaryFilled = True
        Exit Function
      End If
    Next content
  Next row
End Function

Function LimitaryHasHeader(block) As Boolean
  Dim i As Long, cell
  For i = 0 To block.Columns.Count - 1
    cell = block.getCellByPosition(i, 0)
    If Not LimitaryIsValue(cell) And LimitaryIsName(cell.String) Then LimitaryHasHeader = True
  Next i
End Function

' A bound such as <0.5, or a number kept as text, is no column's name.
Function LimitaryIsName(text As String) As Boolean
  Dim rest As String
  rest = Trim(text)
  If Left(rest, 1) = "<" Or Left(rest, 1) = ">" Then rest = Trim(Mid(rest, 2))
  LimitaryIsName = rest <> "" And Not LimitaryIsPlain(Join(Split(rest, ","), "."))
End Function

Function LimitaryNames(block, name As String) As Boolean
  Dim i As Long
  For i = 0 To block.Columns.Count - 1
    If LCase(Trim(block.getCellByPosition(i, 0).String)) = name Then LimitaryNames = True
  Next i
End Function

' Takes an earlier answer away, so that an old verdict never stands beside a new value, and makes sure that there is room.
Function LimitaryClearAdded(block) As String
  Dim sheet, a, k As Long, column
  a = block.RangeAddress
  sheet = block.Spreadsheet
  For k = a.EndColumn + 1 To a.EndColumn + 8
    column = sheet.getCellRangeByPosition(k, a.StartRow, k, a.EndRow)
    If Left(column.getCellByPosition(0, 0).String, Len(ADDED)) <> ADDED Then Exit For
    column.clearContents(1 + 2 + 4 + 16)
  Next k
  If LimitaryFilled(sheet.getCellRangeByPosition(a.EndColumn + 1, a.StartRow, a.EndColumn + 6, a.EndRow)) Then
    LimitaryClearAdded = "The answer needs the 6 columns right of the selection, and there is something in them. Nothing was sent."
  End If
End Function

' Sends the block and writes the columns that the answer adds beside it.
Function LimitarySend(doc, block, url As String, header As Boolean) As String
  Dim rows, text As String, body As String, trouble As String, i As Long, k As Long, wide As Long, target
  trouble = LimitaryText(doc, block, body)
  If trouble = "" Then trouble = LimitaryCall("POST", LimitaryBase(doc), url & "&refusals=text", body, text)
  ' Calc would tell a macro the status of a refusal and not its text. A block has lines, a refusal is one without an end.
  If trouble = "" And Left(text, 9) = "refused: " And InStr(text, Chr(10)) = 0 Then trouble = "The service refused: " & Mid(text, 10)
  If trouble = "" Then
    rows = LimitaryParse(text)
    wide = block.Columns.Count
    If UBound(rows) + 1 <> block.Rows.Count Then trouble = "The answer has " & (UBound(rows) + 1) & " rows, " & block.Rows.Count & " were sent; it was not written."
  End If
  If trouble = "" Then
    For i = 0 To UBound(rows)
      For k = wide To UBound(rows(i))
        target = block.Spreadsheet.getCellByPosition(block.RangeAddress.StartColumn + k, block.RangeAddress.StartRow + i)
        LimitaryPut(target, rows(i)(k), (i > 0 Or Not header) And k = wide + LimitaryVersionAt(url))
      Next k
    Next i
  End If
  LimitarySend = trouble
End Function

' Which of the added columns is the version: a number, all others are text.
Function LimitaryVersionAt(url As String) As Long
  LimitaryVersionAt = IIf(InStr(url, "/sheet/judge/") > 0, 2, IIf(InStr(url, "preview=1") > 0, -1, 3))
End Function

' How many rows a preview refuses.
Function LimitaryRefusedRows(block) As Long
  Dim a, i As Long
  a = block.RangeAddress
  For i = a.StartRow + 1 To a.EndRow
    If block.Spreadsheet.getCellByPosition(a.EndColumn + 1, i).String = "REFUSED" Then LimitaryRefusedRows = LimitaryRefusedRows + 1
  Next i
End Function

' Puts a text into a cell as text, never as a formula; a number as a number where one is wanted.
Sub LimitaryPut(cell, text, asNumber As Boolean)
  If asNumber And LimitaryIsPlain(text) Then
    cell.Value = Val(text)
  ElseIf text <> "" Then
    cell.String = text
  End If
End Sub

' Writes the block as text separated by tabs, numbers with a decimal point whatever the locale.
Function LimitaryText(doc, block, body As String) As String
  Dim lines(), cells(), i As Long, k As Long, cell
  ReDim lines(block.Rows.Count - 1)
  For i = 0 To block.Rows.Count - 1
    ReDim cells(block.Columns.Count - 1)
    For k = 0 To block.Columns.Count - 1
      cell = block.getCellByPosition(k, i)
      If cell.getError() <> 0 Then
        LimitaryText = "Row " & (block.RangeAddress.StartRow + i + 1) & " has a cell with an error, " & cell.String & ". Nothing was sent."
        Exit Function
      End If
      cells(k) = """" & Join(Split(LimitaryCellText(doc, cell), """"), """""") & """"
    Next k
    lines(i) = Join(cells, Chr(9))
  Next i
  body = Join(lines, Chr(10)) & Chr(10)
End Function

Function LimitaryIsValue(cell) As Boolean
  Select Case cell.Type
  Case com.sun.star.table.CellContentType.VALUE
    LimitaryIsValue = True
  Case com.sun.star.table.CellContentType.FORMULA
    LimitaryIsValue = (cell.FormulaResultType2 = com.sun.star.sheet.FormulaResult.VALUE)
  End Select
End Function

Function LimitaryCellText(doc, cell) As String
  If Not LimitaryIsValue(cell) Then
    LimitaryCellText = cell.String
  ElseIf LimitaryIsDate(doc, cell) Then
    LimitaryCellText = LimitaryIso(cell.Value, LimitaryDayZero(doc))
  Else
    LimitaryCellText = LimitaryNumber(cell.Value, cell.String)
  End If
End Function

Function LimitaryIsDate(doc, cell) As Boolean
  LimitaryIsDate = (doc.NumberFormats.getByKey(cell.NumberFormat).Type And com.sun.star.util.NumberFormat.DATE) <> 0
End Function

Function LimitaryHasDates(doc, block) As Boolean
  Dim i As Long, k As Long, cell
  For i = 1 To block.Rows.Count - 1
    For k = 0 To block.Columns.Count - 1
      cell = block.getCellByPosition(k, i)
      If LimitaryIsValue(cell) Then
        If LimitaryIsDate(doc, cell) Then
          LimitaryHasDates = True
          Exit Function
        End If
      End If
    Next k
  Next i
End Function

' A number as its cell shows it, which keeps zeros at its end, where that is the whole number; else with all its digits.
Function LimitaryNumber(value As Double, shown As String) As String
  Dim text As String
  text = Join(Split(Trim(shown), Mid(CStr(1.5), 2, 1)), ".")
  If LimitaryIsPlain(text) Then
    If Val(text) = value Then
      LimitaryNumber = text
      Exit Function
    End If
  End If
  LimitaryNumber = Trim(Str(value))
End Function

' Digits with at most one point and a minus before them.
Function LimitaryIsPlain(given) As Boolean
  Dim i As Long, c As String, digits As Long, points As Long, text As String
  text = given
  If Left(text, 1) = "-" Then text = Mid(text, 2)
  For i = 1 To Len(text)
    c = Mid(text, i, 1)
    If c = "." Then
      points = points + 1
    ElseIf c >= "0" And c <= "9" Then
      digits = digits + 1
    Else
      Exit Function
    End If
  Next i
  LimitaryIsPlain = digits > 0 And points <= 1
End Function

' The day 0 of the document, counted from that of Basic.
Function LimitaryDayZero(doc) As Long
  LimitaryDayZero = CLng(DateSerial(doc.NullDate.Year, doc.NullDate.Month, doc.NullDate.Day))
End Function

' A date in a cell, to the second, without an offset.
Function LimitaryIso(value As Double, zero As Long) As String
  Dim days As Long, seconds As Long
  days = Int(value)
  seconds = Int((value - days) * 86400 + 0.5)
  If seconds = 86400 Then
    days = days + 1
    seconds = 0
  End If
  LimitaryIso = Year(days + zero) & "-" & Right("0" & Month(days + zero), 2) & "-" & Right("0" & Day(days + zero), 2) & "T" & _
    Right("0" & (seconds \ 3600), 2) & ":" & Right("0" & ((seconds \ 60) Mod 60), 2) & ":" & Right("0" & (seconds Mod 60), 2)
End Function

' Takes text separated by tabs apart: an array of rows, each an array of cells.
Function LimitaryParse(text As String)
  Dim rows(), cells(), count As Long, wide As Long, cell As String, quoted As Boolean, c As String, i As Long
  If InStr(text, """") = 0 Then ' the common case, and much faster
    cells = Split(Join(Split(text, Chr(13)), ""), Chr(10))
    ReDim rows(UBound(cells) - 1)
    For i = 0 To UBound(rows)
      rows(i) = Split(cells(i), Chr(9))
    Next i
    LimitaryParse = rows()
    Exit Function
  End If
  ReDim rows(0)
  i = 1
  Do While i <= Len(text)
    c = Mid(text, i, 1)
    If quoted Then
      If c = """" And Mid(text, i + 1, 1) = """" Then
        cell = cell & """"
        i = i + 1
      ElseIf c = """" Then
        quoted = False
      Else
        cell = cell & c
      End If
    ElseIf c = """" And cell = "" Then
      quoted = True
    ElseIf c = Chr(9) Or c = Chr(10) Then
      ReDim Preserve cells(wide)
      cells(wide) = cell
      cell = ""
      wide = wide + 1
      If c = Chr(10) Then
        ReDim Preserve rows(count)
        rows(count) = cells()
        count = count + 1
        wide = 0
        ReDim cells(0)
      End If
    ElseIf c <> Chr(13) Then
      cell = cell & c
    End If
    i = i + 1
  Loop
  LimitaryParse = rows()
End Function

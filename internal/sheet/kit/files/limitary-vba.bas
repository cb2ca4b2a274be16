Attribute VB_Name = "Limitary"
' Title: A VBA module: judge the selected cells, post them, fetch the limits
' Install: In a program of the Excel kind on Windows: Alt+F11, File, Import File, this file; save the workbook as one with
'   macros, or import into the personal macro workbook. Run LimitaryJudge, LimitaryPost or LimitaryFetchLimits with Alt+F8.
'   Cells named limitary_base (address of the service), limitary_chart, limitary_source, limitary_lot and limitary_zone
'   (Formulas, Name Manager) say what would otherwise be asked for.
' Limits: Windows only, since it uses MSXML2.XMLHTTP, which comes with it. 10,000 rows at once. A post is all or nothing, and
'   safe to repeat. Dates in cells need a zone. The key is kept in the registry of this account, readable for whoever is
'   logged on, never in a workbook; LimitaryForgetKey removes it. It is sent to the address it was given for and to no other.
' Run here: not run here; no program that runs VBA was at hand. LibreOffice's Basic reads it without complaint, and gives
'   right answers for the functions that touch neither a cell nor the network
Option Explicit

' The service, where no cell named limitary_base gives another address.
Private Const SERVICE As String = "http://127.0.0.1:7410"
Private Const ROWS_MAX As Long = 10000
Private Const LIMITS_SHEET As String = "limitary_limits"
Private Const ADDED As String = "limitary_"
Private Const ADDED_MAX As Long = 6

' --- What a user runs ------------------------------------------------------------------------------------------------

' Judges the selected column, or the selected columns value, value 2, ..., and stores nothing.
Public Sub LimitaryJudge()
    Dim block As Range, url As String, trouble As String
    trouble = SelectedBlock(block)
    If trouble = "" Then trouble = ClearAdded(block)
    If trouble = "" Then
        url = ServiceAddress() & "/sheet/judge/" & Encode(Setting("chart", "Judge against which chart?")) & "?delimiter=tab&decimal=point"
        If Not HasHeader(block) Then url = url & "&header=no"
        If Setting("lot", "") <> "" Then url = url & "&lot=" & Encode(Setting("lot", ""))
        trouble = Send(block, url)
    End If
    Tell trouble
End Sub

' Posts the selected block. Its first row names the columns: id, time, value and whatever else there is.
Public Sub LimitaryPost()
    Dim block As Range, url As String, trouble As String
    trouble = SelectedBlock(block)
    If trouble = "" Then
        If Not HasHeader(block) Then trouble = "The first row of what is posted must name the columns: id, time, value."
    End If
    If trouble = "" Then trouble = ClearAdded(block)
    If trouble = "" Then
        url = ServiceAddress() & "/sheet/results/" & Encode(Setting("chart", "Post to which chart?")) & "?delimiter=tab&decimal=point"
        If Not HasName(block, "source") Then url = url & "&source=" & Encode(Setting("source", "Where do the results come from? Always give the same for the same sheet."))
        If Setting("lot", "") <> "" And Not HasName(block, "lot") Then url = url & "&lot=" & Encode(Setting("lot", ""))
        If HasDates(block) Then url = url & "&zone=" & Encode(Setting("zone", "Which zone are the times of? Such as Europe/London or +01:00"))
        trouble = Send(block, url)
    End If
    Tell trouble
End Sub

' Fetches the limits in force into the sheet limitary_limits.
Public Sub LimitaryFetchLimits()
    Dim rows As Collection, sheet As Worksheet, answer As String, trouble As String, i As Long, k As Long
    trouble = Request("GET", ServiceAddress(), ServiceAddress() & "/sheet/limits.tsv?decimal=point", "", answer)
    If trouble <> "" Then
        Tell trouble
        Exit Sub
    End If
    Set rows = Parse(answer)
    Set sheet = LimitsSheet()
    For i = 1 To rows.Count
        For k = 1 To rows(i).Count
            PutCell sheet.Cells(i, k), rows(i)(k), i > 1 And IsNumberColumn(rows(1)(k))
        Next k
        PutCell sheet.Cells(i, rows(1).Count + 1), IIf(i = 1, "limitary_fetched_at", Format$(Now, "yyyy\-mm\-dd\Thh\:nn\:ss")), False
    Next i
End Sub

' Forgets the key of the service that this workbook names.
Public Sub LimitaryForgetKey()
    SaveSetting "Limitary", "Keys", ServiceAddress(), ""
End Sub

Private Sub Tell(ByVal trouble As String)
    If trouble <> "" Then MsgBox trouble, vbExclamation, "Limitary"
End Sub

' --- Settings, the key and the network -------------------------------------------------------------------------------

' What the cell named limitary_NAME says; else the answer to the question, if there is one.
Private Function Setting(ByVal key As String, ByVal question As String) As String
    Dim item As Name
    For Each item In ActiveWorkbook.Names
        If LCase$(item.Name) = ADDED & key Then
            Setting = Trim$(CStr(item.RefersToRange.Cells(1, 1).Value))
            Exit Function
        End If
    Next item
    If question <> "" Then Setting = Trim$(InputBox(question, "Limitary"))
End Function

Private Function ServiceAddress() As String
    ServiceAddress = Setting("base", "")
    If ServiceAddress = "" Then ServiceAddress = SERVICE
    Do While Right$(ServiceAddress, 1) = "/"
        ServiceAddress = Left$(ServiceAddress, Len(ServiceAddress) - 1)
    Loop
End Function

Private Function KeyOf(ByVal at As String) As String
    KeyOf = GetSetting("Limitary", "Keys", at, "")
    If KeyOf <> "" Then Exit Function
    KeyOf = Trim$(InputBox("The key for " & at & ". It is kept in your profile and sent nowhere else.", "Limitary"))
    If KeyOf <> "" Then SaveSetting "Limitary", "Keys", at, KeyOf
End Function

Private Function Request(ByVal method As String, ByVal at As String, ByVal url As String, ByVal body As String, ByRef answer As String) As String
    Dim http As Object, key As String
    key = KeyOf(at)
    If key = "" Then
        Request = "Nothing was sent: there is no key for " & at & "."
        Exit Function
    End If
    On Error GoTo Failed
    Set http = CreateObject("MSXML2.XMLHTTP.6.0")
    http.Open method, url, False
    http.setRequestHeader "Authorization", "Bearer " & key
    http.setRequestHeader "Content-Type", "text/tab-separated-values; charset=utf-8"
    http.setRequestHeader "Cache-Control", "no-cache"
    http.send body
    answer = http.responseText
    If http.Status <> 200 Then Request = "The service refused (" & http.Status & "): " & answer
    Exit Function
Failed:
    Request = "No answer from " & at & "; nothing is judged. " & Err.Description
End Function

Private Function Encode(ByVal text As String) As String
    Dim i As Long, c As String, code As Long
    For i = 1 To Len(text)
        c = Mid$(text, i, 1)
        code = AscW(c) And &HFFFF&
        If c Like "[A-Za-z0-9._~-]" And code < 128 Then
            Encode = Encode & c
        ElseIf code < 128 Then
            Encode = Encode & Percent(code)
        ElseIf code < 2048 Then
            Encode = Encode & Percent(192 + code \ 64) & Percent(128 + code Mod 64)
        Else
            Encode = Encode & Percent(224 + code \ 4096) & Percent(128 + (code \ 64) Mod 64) & Percent(128 + code Mod 64)
        End If
    Next i
End Function

Private Function Percent(ByVal code As Long) As String
    Percent = "%" & Right$("0" & Hex$(code), 2)
End Function

' --- The block: out of the sheet, and the answer beside it -----------------------------------------------------------

' Finds the selected block: one rectangle, without the empty rows below and without columns that an earlier answer added.
Private Function SelectedBlock(ByRef block As Range) As String
    Dim wide As Long, high As Long
    If TypeName(Selection) <> "Range" Then
        SelectedBlock = "Select the cells first."
        Exit Function
    ElseIf Selection.Areas.Count <> 1 Then
        SelectedBlock = "Select one rectangle of cells."
        Exit Function
    End If
    Set block = Application.Intersect(Selection, Selection.Worksheet.UsedRange)
    If block Is Nothing Then
        SelectedBlock = "The selected cells are empty."
        Exit Function
    End If
    wide = block.Columns.Count
    Do While wide > 1 And Left$(CStr(block.Cells(1, wide).Text), Len(ADDED)) = ADDED
        wide = wide - 1
    Loop
    high = block.rows.Count
    Do While high > 1 And Application.WorksheetFunction.CountA(block.rows(high).Resize(1, wide)) = 0
        high = high - 1
    Loop
    Set block = block.Resize(high, wide)
    If Application.WorksheetFunction.CountA(block) = 0 Then SelectedBlock = "The selected cells are empty."
    If high > ROWS_MAX + 1 Then SelectedBlock = "More than " & ROWS_MAX & " rows are selected, which is the limit; send them in parts."
End Function

Private Function IsNumberCell(ByVal cell As Range) As Boolean
    IsNumberCell = (VarType(cell.Value2) = vbDouble)
End Function

' A bound such as <0.5, or a number kept as text, is no column's name.
Private Function HasHeader(ByVal block As Range) As Boolean
    Dim cell As Range, rest As String
    For Each cell In block.rows(1).Cells
        rest = Trim$(CStr(cell.Text))
        If Left$(rest, 1) = "<" Or Left$(rest, 1) = ">" Then rest = Trim$(Mid$(rest, 2))
        If Not IsNumberCell(cell) And rest <> "" And Not IsPlain(Replace(rest, ",", ".")) Then HasHeader = True
    Next cell
End Function

Private Function HasName(ByVal block As Range, ByVal title As String) As Boolean
    Dim cell As Range
    For Each cell In block.rows(1).Cells
        If LCase$(Trim$(CStr(cell.Text))) = title Then HasName = True
    Next cell
End Function

Private Function HasDates(ByVal block As Range) As Boolean
    Dim cell As Range
    For Each cell In block.Cells
        If VarType(cell.Value) = vbDate Then
            HasDates = True
            Exit Function
        End If
    Next cell
End Function

' Takes an earlier answer away, so that an old verdict never stands beside a new value, and makes sure that there is room.
Private Function ClearAdded(ByVal block As Range) As String
    Dim k As Long, column As Range
    For k = 1 To ADDED_MAX
        Set column = block.Columns(block.Columns.Count).Offset(0, k)
        If Left$(CStr(column.Cells(1, 1).Text), Len(ADDED)) <> ADDED Then Exit For
        column.ClearContents
    Next k
    If Application.WorksheetFunction.CountA(block.Columns(block.Columns.Count).Offset(0, 1).Resize(block.rows.Count, ADDED_MAX)) > 0 Then
        ClearAdded = "The answer needs the " & ADDED_MAX & " columns right of the selection, and there is something in them. Nothing was sent."
    End If
End Function

' Sends the block and writes the columns that the answer adds beside it.
Private Function Send(ByVal block As Range, ByVal url As String) As String
    Dim rows As Collection, body As String, answer As String, i As Long, k As Long, version As Long
    Send = BlockText(block, body)
    If Send = "" Then Send = Request("POST", ServiceAddress(), url, body, answer)
    If Send <> "" Then Exit Function
    Set rows = Parse(answer)
    If rows.Count <> block.rows.Count Then
        Send = "The answer has " & rows.Count & " rows, " & block.rows.Count & " were sent; it was not written."
        Exit Function
    End If
    version = block.Columns.Count + IIf(InStr(url, "/sheet/judge/") > 0, 3, 4)
    For i = 1 To rows.Count
        For k = block.Columns.Count + 1 To rows(i).Count
            PutCell block.Cells(i, k), rows(i)(k), k = version
        Next k
    Next i
End Function

' Writes the block as text separated by tabs, numbers with a decimal point whatever the locale.
Private Function BlockText(ByVal block As Range, ByRef body As String) As String
    Dim lines() As String, cells() As String, i As Long, k As Long
    ReDim lines(1 To block.rows.Count)
    For i = 1 To block.rows.Count
        ReDim cells(1 To block.Columns.Count)
        For k = 1 To block.Columns.Count
            If IsError(block.Cells(i, k).Value) Then
                BlockText = "Cell " & block.Cells(i, k).Address(False, False) & " holds an error. Nothing was sent."
                Exit Function
            End If
            cells(k) = """" & Replace(CellText(block.Cells(i, k)), """", """""") & """"
        Next k
        lines(i) = Join(cells, vbTab)
    Next i
    body = Join(lines, vbLf) & vbLf
End Function

Private Function CellText(ByVal cell As Range) As String
    Dim shown As String
    If VarType(cell.Value) = vbDate Then
        CellText = Format$(cell.Value, "yyyy\-mm\-dd\Thh\:nn\:ss")
        Exit Function
    ElseIf Not IsNumberCell(cell) Then
        CellText = CStr(cell.Value)
        Exit Function
    End If
    ' A number as its cell shows it, which keeps zeros at its end, where that is the whole number; else with all its digits.
    shown = Replace(Trim$(cell.Text), Application.International(xlDecimalSeparator), ".")
    CellText = Trim$(Str$(cell.Value2))
    If IsPlain(shown) Then
        If Val(shown) = cell.Value2 Then CellText = shown
    End If
End Function

' Digits with at most one point and a minus before them.
Private Function IsPlain(ByVal text As String) As Boolean
    If Left$(text, 1) = "-" Then text = Mid$(text, 2)
    IsPlain = (text Like "*[0-9]*") And Not (text Like "*[!0-9.]*") And (Len(text) - Len(Replace(text, ".", "")) <= 1)
End Function

' Puts a text into a cell as text, never as a formula; a number as a number where one is wanted.
Private Sub PutCell(ByVal cell As Range, ByVal text As String, ByVal asNumber As Boolean)
    If asNumber And IsPlain(text) Then
        cell.NumberFormat = "General"
        cell.Value2 = Val(text)
    Else
        cell.NumberFormat = "@"
        cell.Value2 = text
    End If
End Sub

Private Function LimitsSheet() As Worksheet
    Dim sheet As Worksheet
    For Each sheet In ActiveWorkbook.Worksheets
        If sheet.Name = LIMITS_SHEET Then Set LimitsSheet = sheet
    Next sheet
    If LimitsSheet Is Nothing Then
        Set LimitsSheet = ActiveWorkbook.Worksheets.Add(After:=ActiveWorkbook.Worksheets(ActiveWorkbook.Worksheets.Count))
        LimitsSheet.Name = LIMITS_SHEET
    End If
    LimitsSheet.Cells.ClearContents
End Function

' The columns of the table of limits that hold text; all others hold numbers.
Private Function IsNumberColumn(ByVal title As String) As Boolean
    IsNumberColumn = InStr(" chart title lot unit kind track_state effective_from provisional rules dispersion_rules ", " " & title & " ") = 0
End Function

' Takes text separated by tabs apart: a collection of rows, each a collection of cells.
Private Function Parse(ByVal text As String) As Collection
    Dim rows As New Collection, row As New Collection, cell As String, quoted As Boolean, c As String, i As Long
    i = 1
    Do While i <= Len(text)
        c = Mid$(text, i, 1)
        If quoted And c = """" And Mid$(text, i + 1, 1) = """" Then
            cell = cell & c
            i = i + 1
        ElseIf quoted And c = """" Then
            quoted = False
        ElseIf quoted Then
            cell = cell & c
        ElseIf c = """" And cell = "" Then
            quoted = True
        ElseIf c = vbTab Or c = vbLf Then
            row.Add cell
            cell = ""
            If c = vbLf Then
                rows.Add row
                Set row = New Collection
            End If
        ElseIf c <> vbCr Then
            cell = cell & c
        End If
        i = i + 1
    Loop
    Set Parse = rows
End Function

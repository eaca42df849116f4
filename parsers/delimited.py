"""thin"""
from __future__ import annotations
import csv, hashlib, io
from spikeward.parsers.text import decode, folded
from spikeward.parsers.numbers import Cell, decimal_sign, number
from spikeward.parsers.dates import utc
from spikeward.rules.records import *
import re
DEL={"semicolon":";","comma":",","tab":"\t","bar":"|"}
class Delimited:
    name="delimited"
    def read(self, content, layout):
        text,enc=decode(content,layout.encoding)
        lines=text.split("\n")
        delim=DEL.get(layout.delimiter,layout.delimiter)
        want=[folded(h) for h in (layout.header_contains or tuple(layout.columns.values()))]
        best=None
        for d in ([delim] if delim!="auto" else [";","\t",",","|"]):
            rows=list(csv.reader(lines,delimiter=d,quotechar=layout.quote_char))
            for n,r in enumerate(rows):
                hs=[folded(re.sub(r"\s*[\[(/].*$","",c)) for c in r]
                if all(w in hs or w in [folded(c) for c in r] for w in want): best=(rows,n,hs,r);break
            if best: break
        if not best: raise Unreadable(f"no row holds the headings {', '.join(layout.header_contains)}")
        rows,n,hs,raw=best
        def col(meaning):
            h=layout.columns.get(meaning)
            if not h: return None
            h=folded(h)
            full=[folded(c) for c in raw]
            return full.index(h) if h in full else hs.index(h) if h in hs else None
        idx={m:col(m) for m in layout.columns}
        for m,i in idx.items():
            if i is None: raise Unreadable(f"the column '{layout.columns[m]}' is missing",n+1)
        body=[]
        for k,r in enumerate(rows[n+1:],start=n+2):
            if not any(c.strip() for c in r): continue
            if r[0].strip() in layout.ends_at: break
            if [folded(c) for c in r]==[folded(c) for c in raw]: continue
            if len(r)!=len(raw): raise Unreadable(f"the row has {len(r)} cells, the headings {len(raw)}",k)
            body.append((k,[c.strip() for c in r]))
        if not body: raise Unreadable("no rows below the headings",n+1)
        nums=[m for m in ("signal","signal_rsd","signal_sd") if idx.get(m) is not None]
        tok={*layout.not_detected,*layout.over_range}
        sign=decimal_sign(layout.decimal,[Cell(r[idx[m]],k,layout.columns[m]) for k,r in body for m in nums if r[idx[m]] and r[idx[m]] not in tok])
        out=[]
        g=lambda r,m: r[idx[m]] if idx.get(m) is not None else ""
        for k,r in body:
            t=g(r,"signal"); q="";s=None
            if t in layout.not_detected or t.startswith("<"): q=NOT_DETECTED
            elif t in layout.over_range or t.startswith(">"): q=OVER_RANGE
            elif not t: q=MISSING
            elif t.startswith("#"): q=FAULTY
            else: s=number(Cell(t,k,"signal"),sign)
            sd=None
            if s is not None and g(r,"signal_rsd"): sd=abs(s)*number(Cell(g(r,"signal_rsd"),k,"rsd"),sign)/100
            vals=tuple((m,g(r,m)) for m in ("mass","dry_matter","aliquot","addition","final","dilution","standard") if g(r,m))
            unit=g(r,"unit") or layout.unit
            if not unit: raise Unreadable("no unit",k)
            out.append(Entry(k,g(r,"solution"),g(r,"analyte"),g(r,"line"),unit,s,t,q,int(g(r,"readings") or 1),sd,
              utc(g(r,"measured_at"),layout.date_patterns,layout.time_zone,k,"t") if g(r,"measured_at") else "",
              utc(g(r,"processed_at"),layout.date_patterns,layout.time_zone,k,"t") if g(r,"processed_at") else "",
              int(g(r,"order")) if g(r,"order") else None, vals, hashlib.sha256(repr(r).encode()).hexdigest()))
        return Table(tuple(out),None,(enc,))
READER=Delimited()

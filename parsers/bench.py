"""thin"""
from __future__ import annotations
import csv, hashlib, re
from spikeward.parsers.text import decode, folded
from spikeward.rules.records import *
def read_bench(content, rule, folder, path):
    text,_=decode(content,rule.encoding)
    lines=text.split("\n")
    d=";" if lines[0].count(";")>lines[0].count(",") else ","
    rows=list(csv.reader(lines,delimiter=d)); head=rows[0]
    def find(h):
        for i,c in enumerate(head):
            m=re.fullmatch(r"(.*?)\s*[\[(](.*?)[\])]\s*",c)
            if folded(c)==folded(h) or (m and folded(m[1])==folded(h)): return i,(m[2] if m else "")
        raise Unreadable(f"the column '{h}' is missing",1)
    ks={k:find(h) for k,h in rule.key.items()}; cs={k:find(h) for k,h in rule.columns.items()}
    out=[]
    for n,r in enumerate(rows[1:],start=2):
        if not any(r): continue
        g=lambda k: r[ks[k][0]].strip() if k in ks else ""
        vals=tuple((k,f"{r[i].strip().replace(',','.')} {u}".strip()) for k,(i,u) in cs.items() if r[i].strip())
        out.append(BenchEntry(folder,g("batch"),g("sample"),g("level"),vals,path,n,hashlib.sha256(repr(r).encode()).hexdigest()))
    return tuple(out)

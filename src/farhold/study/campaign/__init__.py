"""Long studies in chunks: declared once, run on any engine, never losing a finished chunk, the same to the bit."""

from farhold.study.campaign.chunks import Chunk
from farhold.study.campaign.declaration import Campaign, Findings, chunk_rng
from farhold.study.campaign.folder import check_folder
from farhold.study.campaign.journal import InterruptedStudyError, run_campaign

__all__ = ["Campaign", "Chunk", "Findings", "InterruptedStudyError", "check_folder", "chunk_rng", "run_campaign"]

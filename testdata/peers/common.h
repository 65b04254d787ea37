/* CSV reading, clock, start values, timing loop and JSON output shared by the C programs. */
#pragma once
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <fcntl.h>
#include <unistd.h>
#include <time.h>
#include "kernels.h"
static double now(void){struct timespec t;clock_gettime(CLOCK_MONOTONIC,&t);return t.tv_sec+1e-9*t.tv_nsec;}
static int load(const char*path,Data*d){            /* whole file, strtod loop, polar -> rectangular */
  static char buf[1<<20]; int fd=open(path,O_RDONLY); if(fd<0){perror(path);exit(1);}
  long k=0,r; while((r=read(fd,buf+k,sizeof buf-1-k))>0)k+=r; close(fd); buf[k]=0;
  char*s=strchr(buf,'\n'); int m=0; if(!s)return 0; s++;
  while(*s && m<MAXM){ char*e; double f=strtod(s,&e); if(e==s)break; double z=strtod(e+1,&e), a=strtod(e+1,&e)*(M_PI/180); s=e+1;
    d->w[m]=2*M_PI*f; d->iw[m]=1/d->w[m]; d->zr[m]=z*cos(a); d->zi[m]=z*sin(a); d->wt[m]=1/z; m++; }
  return d->m=m;
}
static void start(const Circuit*c,double*x){for(int j=0;j<c->n;j++)x[j]=log(c->nom[j]*(j&1?1./3:3.));}
static void truth(const char*dir,const Circuit*c,int N,double(*t)[MAXP]){
  char p[512]; snprintf(p,sizeof p,"%s/%s/truth.csv",dir,c->name); FILE*h=fopen(p,"r"); char line[512]; if(!h||!fgets(line,512,h))exit(1);
  for(int k=0;k<N;k++){ if(!fgets(line,512,h))exit(1); char*s=strchr(line,','); for(int j=0;j<c->n;j++){t[k][j]=strtod(s+1,&s);} } fclose(h);
}
static int cmpd(const void*a,const void*b){double x=*(double*)a,y=*(double*)b;return (x>y)-(x<y);}
static double med(double*v,int n){qsort(v,n,sizeof*v,cmpd);return n&1?v[n/2]:0.5*(v[n/2-1]+v[n/2]);}
typedef struct { int nfev,njev,info; double cost; } Stat;
typedef void (*Fit)(const Circuit*,const Data*,double*x,Stat*);
/* five warm-up passes, then one timed pass fit-only and one timed pass read+fit */
static void timing(const char*engine,Fit fit,const char*dir,int N,const char*costdir){
  for(int q=0;q<3;q++){ const Circuit*c=&CIRC[q]; Data*D=(Data*)malloc(N*sizeof(Data)); double(*T)[MAXP]=(double(*)[MAXP])malloc(N*sizeof*T);
    double*tf=(double*)malloc(N*8),*tt=(double*)malloc(N*8),*nf=(double*)malloc(N*8),*nj=(double*)malloc(N*8); char p[512]; double worst=0; Stat s;
    truth(dir,c,N,T); FILE*h=NULL; if(costdir){snprintf(p,sizeof p,"%s/cost_%s_%s.txt",costdir,engine,c->name);h=fopen(p,"w");}
    for(int k=0;k<N;k++){snprintf(p,sizeof p,"%s/%s/%03d.csv",dir,c->name,k);load(p,&D[k]);}
    for(int pass=0;pass<6;pass++)for(int k=0;k<N;k++){double x[MAXP]; start(c,x); double t=now(); fit(c,&D[k],x,&s); tf[k]=now()-t; nf[k]=s.nfev; nj[k]=s.njev;
      if(pass==5){ for(int j=0;j<c->n;j++){double e=fabs(exp(x[j])/T[k][j]-1); if(!(e<=worst))worst=e;} if(h)fprintf(h,"%.12g\n",s.cost);} }
    for(int k=0;k<N;k++){double x[MAXP]; start(c,x); snprintf(p,sizeof p,"%s/%s/%03d.csv",dir,c->name,k); double t=now(); load(p,&D[0]); fit(c,&D[0],x,&s); tt[k]=now()-t;}
    if(h)fclose(h);
    printf("{\"engine\":\"%s\",\"circuit\":\"%s\",\"fit_us\":%.4g,\"file_us\":%.4g,\"nfev\":%g,\"njev\":%g,\"maxrel\":%.4g}\n",engine,c->name,med(tf,N)*1e6,med(tt,N)*1e6,med(nf,N),med(nj,N),worst);
    fflush(stdout); free(D);free(T);free(tf);free(tt);free(nf);free(nj); }
}
